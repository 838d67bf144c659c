package turn

import "math"

// Passage is the resonance of the gauge passage between cylinder and transducer, a mass of gas on a spring of gas:
// the transducer shows p_true through 1/(1 + s/(Q ω₀) + s²/ω₀²). It rings after every fast change and makes a ramp
// late by 1/(ω₀Q). The zero value means none is known.
type Passage struct {
	Hz float64 // natural frequency f₀; 0: unknown, nothing is undone
	Q  float64 // quality, > 0
}

// What the inverse may lift: noise grows with (f/f₀)², so the Gaussian is held at -3 dB at min(2.5 f₀, 5 kHz) or below
// (reference/windows.md section 2). White noise then comes out 1.4 to 2.2 times as strong as it went in, against 0.2 to
// 0.35 times without an inverse (700 and 1500 rpm, f₀ 400 to 2000 Hz, 51.2 kHz, 0.5°).
const (
	passageSpan   = 2.5
	passageTop    = 5000.0
	gaussianMinus = 0.13251 // σ·f at -3 dB: √ln2 / 2π
)

// sigma gives the least σ in samples that a passage asks for.
func (p Passage) sigma(rate float64) float64 {
	if p.Hz == 0 {
		return 0
	}
	return gaussianMinus * rate / math.Min(passageSpan*p.Hz, passageTop)
}

// undo makes the weights those of the pressure in the cylinder at the kernel's position: p + p′/(Qω₀) + p″/ω₀² of the
// transducer's pressure, each smoothed by the kernel's Gaussian. The derivatives are those of the parabola fitted under
// the Gaussian, which are its exact derivative filters: smoothing and inverse commute, and the result is the true
// pressure seen through the same Gaussian as without a passage, without delay.
func (k *kernel) undo(p Passage, sigma, rate float64) {
	var s0, s1, s2, s3, s4 float64
	u0, du := (k.d-float64(k.reach))/sigma, 1/sigma // in units of σ the moments are all of order one
	for i, w := range k.w {
		u := u0 + float64(i)*du
		wu := w * u
		wuu := wu * u
		s0 += w
		s1 += wu
		s2 += wuu
		s3 += wuu * u
		s4 += wuu * u * u
	}
	// The parabola c0 + c1 u + c2 u² solves M c = (Σwx, Σwxu, Σwxu²), M symmetric with the moments. What is wanted is
	// g·c, so the weights are w·(a + b u + e u²) with M (a, b, e) = g.
	w0 := 2 * math.Pi * p.Hz / rate * sigma // radians per σ
	g1, g2 := 1/(p.Q*w0), s2/s0+2/(w0*w0)
	m11, m12, r1 := s2-s1*s1/s0, s3-s1*s2/s0, g1-s1/s0 // by elimination, g0 = 1
	m22, r2 := s4-s2*s2/s0, g2-s2/s0
	e := (r2 - m12*r1/m11) / (m22 - m12*m12/m11)
	b := (r1 - m12*e) / m11
	a := (1 - s1*b - s2*e) / s0
	for i, w := range k.w {
		u := u0 + float64(i)*du
		k.h[i] = w * (a + u*(b+u*e))
	}
}
