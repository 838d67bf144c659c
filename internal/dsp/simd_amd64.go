package dsp

import "golang.org/x/sys/cpu"

// hasAVX2 is read once; nothing but speed hangs on it, since both forms give the same bits.
var hasAVX2 = cpu.X86.HasAVX2

// bankRun takes whole fours of samples in vectors and leaves the rest to the plain form.
func bankRun(b *Bank, from, n int) {
	if m := n &^ 3; hasAVX2 && m > 0 {
		bankAVX2(b, from, m)
		from, n = from+m, n-m
	}
	if n > 0 {
		bankPlain(b, from, n)
	}
}

// bankAVX2 is bankPlain with all four lanes side by side; n is a multiple of four.
//
//go:noescape
func bankAVX2(b *Bank, from, n int)

// valuesRun does the first n of them.
func valuesRun(dst []float64, x []int32, gain, offset float64) (n int) {
	if n = len(x) &^ 7; !hasAVX2 || n == 0 {
		return 0
	}
	valuesAVX2(&dst[0], &x[0], n, gain, offset)
	return n
}

//go:noescape
func valuesAVX2(dst *float64, x *int32, n int, gain, offset float64)

func extremesRun(x []int32) (least, most int32) {
	if hasAVX2 {
		return extremesAVX2(&x[0], len(x))
	}
	return extremesPlain(x)
}

//go:noescape
func extremesAVX2(x *int32, n int) (least, most int32)

// linesRun does all positions or none.
func linesRun(l *LineFit, dst [2][]float64, pos []float64, x [2][]float64, shift int) (done bool) {
	if !hasAVX2 || len(pos) < 4 || l.reach < 1 {
		return false
	}
	linesAVX2(l, &dst[0][0], &dst[1][0], &pos[0], len(pos), &x[0][0], &x[1][0], shift)
	return true
}

//go:noescape
func linesAVX2(l *LineFit, dst0, dst1, pos *float64, n int, x0, x1 *float64, shift int)

func levelsRun(b *Bins, peak, rms, square, x, y []float64) {
	if hasAVX2 {
		levelsAVX2(b, &peak[0], &rms[0], &square[0], &x[0], &y[0])
		return
	}
	levelsPlain(b, peak, rms, square, x, y)
}

//go:noescape
func levelsAVX2(b *Bins, peak, rms, square, x, y *float64)

func momentsVectors(m *Moments, from, n int) { momentsAVX2(m, &m.x[from], n) }

//go:noescape
func momentsAVX2(m *Moments, x *int32, n int)

func logsVectors(dst, x []float64, n int) (done int) { return logsAVX2(&dst[0], &x[0], n) }

//go:noescape
func logsAVX2(dst, x *float64, n int) (done int)

func expsVectors(dst, x []float64, n int) (done int) { return expsAVX2(&dst[0], &x[0], n) }

//go:noescape
func expsAVX2(dst, x *float64, n int) (done int)

func rectifyVectors(dst, src []float64, n, w int) { rectifyAVX2(&dst[0], &src[0], n, w) }

//go:noescape
func rectifyAVX2(dst, src *float64, n, w int)
