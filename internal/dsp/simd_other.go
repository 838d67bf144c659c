//go:build !amd64

package dsp

func bankRun(b *Bank, from, n int) { bankPlain(b, from, n) }

func valuesRun(dst []float64, x []int32, gain, offset float64) (n int) { return 0 }

func extremesRun(x []int32) (least, most int32) { return extremesPlain(x) }
