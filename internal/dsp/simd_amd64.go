package dsp

import "golang.org/x/sys/cpu"

// hasAVX2 is read once; nothing but speed hangs on it, since both forms give the same bits.
var hasAVX2 = cpu.X86.HasAVX2

//go:noescape
func bankAVX2(b *Bank, from, n int)

//go:noescape
func valuesAVX2(dst *float64, x *int32, n int, gain, offset float64)

//go:noescape
func extremesAVX2(x *int32, n int) (least, most int32)

//go:noescape
func linesAVX2(l *LineFit, dst0, dst1, pos *float64, n int, x0, x1 *float64, shift int)

//go:noescape
func sumsAVX2(l *LineFit, out *[8][4]float64, pos *float64, n int, x *float64, shift int)

//go:noescape
func levelsAVX2(b *Bins, peak, rms, square, x, y *float64)

//go:noescape
func momentsAVX2(m *Moments, x *int32, n int)

//go:noescape
func logsAVX2(dst, x *float64, n int) (done int)

//go:noescape
func expsAVX2(dst, x *float64, n int) (done int)

//go:noescape
func rectifyAVX2(dst, src *float64, n, w int)
