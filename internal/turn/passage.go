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

// inverse gives the pressure in the cylinder at the kernel's position: p + p′/(Qω₀) + p″/ω₀² of the transducer's
// pressure, each smoothed by the kernel's Gaussian. The derivatives are those of the parabola fitted under the
// weights, which for a Gaussian are its exact derivative filters: smoothing and inverse commute, and the result is the
// true pressure seen through the same Gaussian as without a passage, without delay.
func (k *kernel) inverse(x []float64, p Passage, sigma, rate float64) float64 {
	x = x[:len(k.w)]
	base := x[len(x)/2]
	var s0, s1, s2, s3, s4, y0, y1, y2 float64
	u, du := k.d0/sigma, 1/sigma // in units of σ the moments are all of order one
	for i, w := range k.w {
		y, wu := w*(x[i]-base), w*u
		s0 += w
		s1 += wu
		s2 += wu * u
		s3 += wu * u * u
		s4 += wu * u * u * u
		y0 += y
		y1 += y * u
		y2 += y * u * u
		u += du
	}
	// Normal equations of c0 + c1 u + c2 u², by elimination.
	m11, m12, r1 := s2-s1*s1/s0, s3-s1*s2/s0, y1-s1*y0/s0
	m22, r2 := s4-s2*s2/s0, y2-s2*y0/s0
	c2 := (r2 - m12*r1/m11) / (m22 - m12*m12/m11)
	c1 := (r1 - m12*c2) / m11
	c0 := (y0 - s1*c1 - s2*c2) / s0
	w0 := 2 * math.Pi * p.Hz / rate * sigma // radians per σ
	return base + c0 + c2*s2/s0 + c1/(p.Q*w0) + 2*c2/(w0*w0)
}
