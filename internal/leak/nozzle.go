package leak

import "math"

// nozzle holds what the flow through a small opening needs of the gas.
type nozzle struct {
	k, inv   float64 // exponent and 1/k
	critical float64 // pressure ratio at which the flow chokes
	scale    float64 // 2k/(k−1)
}

func newNozzle(k float64) nozzle {
	return nozzle{k: k, inv: 1 / k, critical: math.Pow(2/(k+1), k/(k-1)), scale: 2 * k / (k - 1)}
}

// soft is the pressure difference (share of the upstream pressure) below which the flow is smoothed, so that its
// slope stays finite where it turns round.
const soft = 0.002

// psi is the flow function of the pressure ratio r = downstream/upstream ≤ 1: the flow is A p ψ/√(RT).
func (n nozzle) psi(r float64) float64 {
	d := 1 - r
	if d <= 0 {
		return 0
	}
	r = max(r, n.critical)
	a := math.Pow(r, n.inv)
	return math.Sqrt(n.scale*a*(a-r)) * math.Sqrt(d/(d+soft))
}

// rate gives g: how fast ln p rises per radian, per m² and per k, through an opening to a place at pOut and RTOut (R
// times temperature). pIn and RTIn belong to the end, vOmega is its volume times the shaft speed.
func (n nozzle) rate(pIn, rtIn, pOut, rtOut, vOmega float64) float64 {
	if pIn >= pOut {
		return -math.Sqrt(rtIn) * n.psi(pOut/pIn) / vOmega
	}
	return math.Sqrt(rtOut) * (pOut / pIn) * n.psi(pIn/pOut) / vOmega
}
