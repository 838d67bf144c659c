package datum

import "math"

// law is a law of wall heat transfer: all are Nu = 0.053 Re^0.8 Pr^0.6 on the hydraulic diameter 6V/A (Adair, Qvale and
// Pearson, Purdue Compressor Conference, 1972, constants as repeated by later comparisons) and differ in the speed
// that Re is made with. The factor on it is estimated, so only the course over the stroke matters.
type law int

const (
	even   law = iota // the same all turn: a swirl that outlives the stroke
	swirl             // the source's own: 1.04 + cos 2θ of the shaft speed, doubled in the half turn about the dead centre of least volume
	piston            // the piston's own speed with a floor under it
	laws   = 3
)

// wall gives heat into the gas over pVω, per radian, for a factor of one on the law and 1 K between wall and gas.
//
// own is the angle in radians after the end's dead centre of least volume; p, t, v its state; bore and area of the piston.
func (l law) wall(own, p, t, v, bore, area, omega, k, rz float64) float64 {
	const viscosity, prandtl = 1.2e-5, .75 // a light gas; they enter with the power 0.2
	surface := 2*area + math.Pi*bore*v/area
	d := 6 * v / surface
	speed := 1.5 // of the shaft's, times d/2
	switch l {
	case swirl:
		speed = 1.04 + math.Cos(2*own)
		if math.Cos(own) > 0 {
			speed *= 2
		}
	case piston:
		speed = .5 + 1.5*math.Abs(math.Sin(own))
	}
	mu := viscosity * math.Pow(t/300, .75)
	re := p / (rz * t) * speed * omega * d * d / (2 * mu)
	cp := k / (k - 1) * rz
	h := .053 * math.Pow(re, .8) * math.Pow(prandtl, -.4) * mu * cp / d
	return h * surface / (p * v * omega)
}
