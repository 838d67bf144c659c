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

// leads gives the inverse as p + lead1·p′ + lead2·p″ of the transducer's pressure, derivatives by the sample. Each is
// smoothed by the same Gaussian: smoothing and inverse commute, and the result is the true pressure seen through the
// Gaussian as without a passage, without delay.
func (p Passage) leads(rate float64) (lead1, lead2 float64) {
	w := 2 * math.Pi * p.Hz / rate
	return 1 / (p.Q * w), 1 / (w * w)
}
