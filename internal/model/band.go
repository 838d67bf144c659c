package model

import "math"

// band is a band-pass for noise: two second-order sections each of high-pass and low-pass, scaled so that white noise of unit
// variance comes out with unit variance.
type band struct {
	sec  [2]section
	gain float64
}

// section is a second-order filter in transposed direct form.
type section struct {
	b0, b1, b2, a1, a2 float64
	z1, z2             float64
}

func (s *section) next(x float64) float64 {
	y := s.b0*x + s.z1
	s.z1 = s.b1*x - s.a1*y + s.z2
	s.z2 = s.b2*x - s.a2*y
	return y
}

// newBand keeps its edges under 0.45 of the sampling rate; bilinear transform with prewarped corners.
func newBand(lo, hi, rate float64) band {
	hi = math.Min(hi, 0.45*rate)
	lo = math.Min(lo, 0.6*hi)
	b := band{sec: [2]section{second(lo, rate, true), second(hi, rate, false)}, gain: 1}
	// The variance gain is the energy of the impulse response.
	c := b
	e := 0.0
	for i := range 4000 {
		x := 0.0
		if i == 0 {
			x = 1
		}
		y := c.next(x)
		e += y * y
	}
	b.gain = 1 / math.Sqrt(e)
	return b
}

// second is a Butterworth section of order two.
func second(f, rate float64, high bool) section {
	k := math.Tan(math.Pi * f / rate)
	n := 1 / (1 + math.Sqrt2*k + k*k)
	s := section{a1: 2 * (k*k - 1) * n, a2: (1 - math.Sqrt2*k + k*k) * n}
	if high {
		s.b0, s.b1, s.b2 = n, -2*n, n
	} else {
		s.b0, s.b1, s.b2 = k*k*n, 2*k*k*n, k*k*n
	}
	return s
}

// passage is the resonance of a gauge passage: x” + (ω/Q)·x' + ω²·x = ω²·p, prewarped at its own frequency.
func passage(f, q, rate float64) section {
	k := math.Tan(math.Pi * f / rate)
	n := 1 / (1 + k/q + k*k)
	return section{b0: k * k * n, b1: 2 * k * k * n, b2: k * k * n, a1: 2 * (k*k - 1) * n, a2: (1 - k/q + k*k) * n}
}

func (b *band) next(x float64) float64 { return b.gain * b.sec[1].next(b.sec[0].next(x)) }
