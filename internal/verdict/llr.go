package verdict

import "math"

// Caps of a class's log-likelihood ratio: below, so that a witness who sees nothing cannot acquit alone; above, so that
// one class never reaches the eight that an alert needs.
const (
	capLo = -2.5
	capHi = 5.0
)

// The shifts, in spreads, of what "present" means, and the scale of the noise about them (vibration.md section 6).
var shifts = [3]float64{3, 5, 8}

const shiftScale = 1.5

// llr is ln p(z | present) − ln p(z | healthy) for a z whose sign has been turned so that positive means present.
// Healthy is Student's t with 4 degrees of freedom (model error has heavy tails), present an equal mixture of the same,
// shifted and 1.5 times as wide. Both tails being heavy, the bare ratio turns back far out on either side; what lies
// further out is never the weaker evidence, so it is held where it turns.
func llr(z float64) float64 {
	z = math.Max(-0.5, math.Min(8.5, z))
	var p float64
	for _, d := range shifts {
		p += student4((z-d)/shiftScale) / shiftScale
	}
	return math.Log(p/float64(len(shifts))) - math.Log(student4(z))
}

// student4 is the density of Student's t with 4 degrees of freedom: 3/8 (1 + t²/4)^(−5/2).
func student4(t float64) float64 { return 0.375 * math.Pow(1+t*t/4, -2.5) }

func capped(l float64) float64 { return math.Max(capLo, math.Min(capHi, l)) }

// both joins two signed z of the same hypothesis that share some of their noise (correlation rho).
func both(a, b, rho float64) float64 { return (a + b) / math.Sqrt(2*(1+rho)) }
