package dsp

import (
	"fmt"
	"math"
	"math/cmplx"
)

// Section is one second-order section in direct form with a0 = 1:
// H(z) = (B0 + B1/z + B2/z²) / (1 + A1/z + A2/z²). A first-order section has B2 = A2 = 0.
type Section struct{ B0, B1, B2, A1, A2 float64 }

// SOS is a cascade of second-order sections.
type SOS []Section

// LowPass designs a Butterworth low-pass of the given order, -3 dB at fc (Hz), for samples at rate (Hz).
//
// Source of this and the two below: the analogue prototype has its poles evenly on the left half of the unit circle;
// band edges are prewarped with tan(πf/rate) and mapped by the bilinear transform (Oppenheim and Schafer,
// "Discrete-Time Signal Processing", chapter on IIR design).
func LowPass(order int, fc, rate float64) (SOS, error) {
	if err := checkDesign(order, fc, fc, rate); err != nil {
		return nil, fmt.Errorf("dsp: low-pass: %w", err)
	}
	w := complex(math.Tan(math.Pi*fc/rate), 0)
	return prototype(order, func(p complex128) SOS {
		return SOS{section(w*p, -1, -1, 1)}
	}), nil
}

// HighPass designs a Butterworth high-pass of the given order, -3 dB at fc (Hz), for samples at rate (Hz).
func HighPass(order int, fc, rate float64) (SOS, error) {
	if err := checkDesign(order, fc, fc, rate); err != nil {
		return nil, fmt.Errorf("dsp: high-pass: %w", err)
	}
	w := complex(math.Tan(math.Pi*fc/rate), 0)
	return prototype(order, func(p complex128) SOS {
		return SOS{section(w/p, 1, 1, -1)}
	}), nil
}

// BandPass designs a Butterworth band-pass with the given order per edge (2*order poles), -3 dB at lo and hi (Hz).
func BandPass(order int, lo, hi, rate float64) (SOS, error) {
	if err := checkDesign(order, lo, hi, rate); err != nil {
		return nil, fmt.Errorf("dsp: band-pass: %w", err)
	}
	if hi <= lo {
		return nil, fmt.Errorf("dsp: band-pass: upper edge %g Hz is not above lower edge %g Hz", hi, lo)
	}
	wl, wh := math.Tan(math.Pi*lo/rate), math.Tan(math.Pi*hi/rate)
	bw, w0 := wh-wl, math.Sqrt(wl*wh)
	// Unit gain at the centre: z on the unit circle at the frequency the bilinear transform takes to w0.
	centre := cmplx.Exp(complex(0, 2*math.Atan(w0)))
	return prototype(order, func(p complex128) SOS {
		half := p * complex(bw/2, 0)
		root := cmplx.Sqrt(half*half - complex(w0*w0, 0))
		if imag(p) != 0 { // two poles here, their conjugates come with the conjugate prototype pole
			return SOS{section(half+root, 1, -1, centre), section(half-root, 1, -1, centre)}
		}
		return SOS{pair(half+root, half-root, 1, -1, centre)}
	}), nil
}

func checkDesign(order int, lo, hi, rate float64) error {
	switch {
	case order < 1 || order > 12:
		return fmt.Errorf("order %d is outside 1..12", order)
	case !(rate > 0) || math.IsInf(rate, 0):
		return fmt.Errorf("rate %g Hz is not positive", rate)
	case !(lo > 0) || !(hi < rate/2):
		return fmt.Errorf("%g..%g Hz is not inside 0..%g Hz", lo, hi, rate/2)
	}
	return nil
}

// prototype walks the poles of the analogue prototype in the upper half plane, the most damped first, so that the
// sections that ring come last in the cascade.
func prototype(order int, build func(p complex128) SOS) SOS {
	var s SOS
	if order%2 == 1 {
		s = append(s, build(-1)...)
	}
	for k := order/2 - 1; k >= 0; k-- {
		a := math.Pi * float64(2*k+1) / float64(2*order) // angle from the imaginary axis
		s = append(s, build(complex(-math.Sin(a), math.Cos(a)))...)
	}
	return s
}

// section makes the section of an analogue pole and its conjugate (or of one real pole), with the zeros z1, z2 in the
// z plane, scaled to gain one at the point "at" of the unit circle.
func section(p complex128, z1, z2 float64, at complex128) Section {
	if imag(p) == 0 {
		d := bilinear(p)
		return scale(Section{B0: 1, B1: -z1, A1: -real(d)}, at)
	}
	return pair(p, cmplx.Conj(p), z1, z2, at)
}

func pair(p1, p2 complex128, z1, z2 float64, at complex128) Section {
	d1, d2 := bilinear(p1), bilinear(p2)
	return scale(Section{B0: 1, B1: -(z1 + z2), B2: z1 * z2, A1: -real(d1 + d2), A2: real(d1 * d2)}, at)
}

func bilinear(p complex128) complex128 { return (1 + p) / (1 - p) }

func scale(s Section, at complex128) Section {
	g := 1 / cmplx.Abs(s.at(at))
	s.B0, s.B1, s.B2 = s.B0*g, s.B1*g, s.B2*g
	return s
}

func (s Section) at(z complex128) complex128 {
	q := 1 / z
	return (complex(s.B0, 0) + q*(complex(s.B1, 0)+q*complex(s.B2, 0))) / (1 + q*(complex(s.A1, 0)+q*complex(s.A2, 0)))
}

// Response gives the complex gain of the cascade at frequency f (Hz) for samples at rate (Hz).
func (s SOS) Response(f, rate float64) complex128 {
	z := cmplx.Exp(complex(0, 2*math.Pi*f/rate))
	h := complex(1, 0)
	for _, sec := range s {
		h *= sec.at(z)
	}
	return h
}
