package leak

import "math"

// nozzle holds what the flow through a small opening needs of the gas.
type nozzle struct {
	inv       float64 // 1/k
	critical  float64 // pressure ratio at which the flow chokes
	criticalA float64 // its power 1/k
	scale     float64 // 2k/(k−1)
}

func newNozzle(k float64) nozzle {
	c := math.Pow(2/(k+1), k/(k-1))
	return nozzle{inv: 1 / k, critical: c, criticalA: math.Pow(c, 1/k), scale: 2 * k / (k - 1)}
}

// soft is the pressure difference (share of the upstream pressure) below which the flow is smoothed, so that its
// slope stays finite where it turns round.
const soft = 0.002

// square is ψ² of the pressure ratio r = downstream/upstream ≤ 1 and a = r^(1/k): the flow is A p ψ/√(RT), with
// ψ² = 2k/(k−1)·a·(a − r), choked at the critical ratio and smoothed.
func (n *nozzle) square(r, a float64) float64 {
	d := max(1-r, 0) // rounding may put r over one where pressures are equal
	if r < n.critical {
		r, a = n.critical, n.criticalA
	}
	return n.scale * a * max(a-r, 0) * (d / (d + soft)) // rounding may put a under r where they meet
}
