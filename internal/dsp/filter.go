package dsp

import "math"

// tiny is where a state is taken for zero. Below about 1e-308 numbers become subnormal and every operation costs a
// hundred times more; a sensor that falls silent would otherwise slow the line down for ever.
const tiny = 1e-200

// flushEvery is how often, in samples of the stream (not of the block), states are looked at for tiny values.
const flushEvery = 1024

// Filter is a causal filter that runs along a stream. Any cutting of the stream into Process calls gives the same
// bits. The zero value passes samples through unchanged; one Filter serves one stream.
type Filter struct {
	sos  SOS
	z    [][2]float64 // transposed direct form II state per section
	seen int          // samples since the last look for tiny states
}

// NewFilter gives a filter at rest. The sections are copied.
func NewFilter(s SOS) *Filter {
	return &Filter{sos: append(SOS(nil), s...), z: make([][2]float64, len(s))}
}

// Reset puts the filter at rest, as if it had seen zeros for ever.
func (f *Filter) Reset() {
	for i := range f.z {
		f.z[i] = [2]float64{}
	}
	f.seen = 0
}

// Settle puts the filter in the state it would have after seeing the constant x for ever, so that a stream that
// begins far from zero does not begin with a jump.
func (f *Filter) Settle(x float64) {
	f.seen = 0
	for i, s := range f.sos {
		y := x * (s.B0 + s.B1 + s.B2) / (1 + s.A1 + s.A2)
		f.z[i] = [2]float64{y - s.B0*x, s.B2*x - s.A2*y}
		x = y
	}
}

// Process filters src into dst (same length; they may be the same slice) and keeps the state for the next call.
func (f *Filter) Process(dst, src []float64) {
	if len(dst) != len(src) {
		panic("dsp: Process: dst and src differ in length")
	}
	for len(src) > 0 {
		n := min(len(src), flushEvery-f.seen)
		f.run(dst[:n], src[:n])
		if f.seen += n; f.seen == flushEvery {
			f.flush()
			f.seen = 0
		}
		dst, src = dst[n:], src[n:]
	}
}

// run takes two sections at a time, so that the processor works on one while it waits for the other.
func (f *Filter) run(dst, src []float64) {
	i := 0
	for ; i+1 < len(f.sos); i += 2 {
		a, b := f.sos[i], f.sos[i+1]
		a1, a2, b1, b2 := f.z[i][0], f.z[i][1], f.z[i+1][0], f.z[i+1][1]
		for j, x := range src {
			y := a.B0*x + a1
			a1 = a.B1*x - a.A1*y + a2
			a2 = a.B2*x - a.A2*y
			w := b.B0*y + b1
			b1 = b.B1*y - b.A1*w + b2
			b2 = b.B2*y - b.A2*w
			dst[j] = w
		}
		f.z[i], f.z[i+1] = [2]float64{a1, a2}, [2]float64{b1, b2}
		src = dst
	}
	if i < len(f.sos) {
		a, z := f.sos[i], f.z[i]
		for j, x := range src {
			y := a.B0*x + z[0]
			z[0] = a.B1*x - a.A1*y + z[1]
			z[1] = a.B2*x - a.A2*y
			dst[j] = y
		}
		f.z[i] = z
	}
	if len(f.sos) == 0 {
		copy(dst, src)
	}
}

func (f *Filter) flush() {
	for i := range f.z {
		for k := range f.z[i] {
			if math.Abs(f.z[i][k]) < tiny {
				f.z[i][k] = 0
			}
		}
	}
}

// ZeroPhase filters a whole block forwards and backwards: no phase shift, and the square of the amplitude response
// (-6 dB at the edges). The block is extended at both ends by its own reflection through the end point, and both
// passes begin settled on their first value; blocks shorter than the extension are extended by what there is. Never use it ahead of an onset: it rings before
// the event. It allocates one working slice.
func ZeroPhase(s SOS, dst, src []float64) {
	if len(dst) != len(src) {
		panic("dsp: ZeroPhase: dst and src differ in length")
	}
	n := len(src)
	if n == 0 {
		return
	}
	pad := min(s.edge(), n-1)
	w := make([]float64, n+2*pad)
	for i := range pad {
		w[i] = 2*src[0] - src[pad-i]
		w[pad+n+i] = 2*src[n-1] - src[n-2-i]
	}
	copy(w[pad:], src)
	f := NewFilter(s)
	for range 2 { // forwards, then the reversed result; reversing twice restores the order
		f.Settle(w[0])
		f.Process(w, w)
		for i, j := 0, len(w)-1; i < j; i, j = i+1, j-1 {
			w[i], w[j] = w[j], w[i]
		}
	}
	copy(dst, w[pad:pad+n])
}

// edge is how many samples ZeroPhase adds at each end: three times the number of taps.
func (s SOS) edge() int {
	taps := 2*len(s) + 1
	first := 0
	for _, sec := range s {
		if sec.B2 == 0 && sec.A2 == 0 {
			first++
		}
	}
	return 3 * (taps - first)
}
