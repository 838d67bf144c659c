//go:build !amd64

package dsp

const hasAVX2 = false

func bankRun(b *Bank, from, n int) { bankPlain(b, from, n) }

func valuesRun(dst []float64, x []int32, gain, offset float64) (n int) { return 0 }

func extremesRun(x []int32) (least, most int32) { return extremesPlain(x) }

func linesRun(l *LineFit, dst [2][]float64, pos []float64, x [2][]float64, shift int) (done bool) {
	return false
}

func levelsRun(b *Bins, peak, rms, square, x, y []float64) {
	levelsPlain(b, peak, rms, square, x, y)
}

func momentsVectors(m *Moments, from, n int) { momentsPlain(m, from, n) }

func logsVectors(dst, x []float64, n int) (done int) { return 0 }

func expsVectors(dst, x []float64, n int) (done int) { return 0 }

func rectifyVectors(dst, src []float64, n, w int) {}
