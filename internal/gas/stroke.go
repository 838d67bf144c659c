package gas

import "math"

// LnDensity is ln(ρ/ρ_suction) on the isentrope of the duty at pressure p (Pa absolute), also a little outside suction ps and
// discharge pd: ∫ d ln p/κ, where 1/κ is the quadratic in ln p that has the volume exponents KVs at suction, KVd at discharge
// and KV on the mean. On a tight stroke without heat ln V + LnDensity stays constant; with the one mean exponent, ln V +
// ln(p/ps)/KV does so only at both ends, and bends by 0.03 to 0.5 per cent of volume between (a leak bends it too). Within
// 1e-4 of the equation of state in ordinary gas, 4e-4 in gas of 30 to 110 bar (tests). Two logarithms: half of them are the line's, once a turn.
func (g Props) LnDensity(ps, pd, p float64) float64 {
	l, u := math.Log(pd/ps), math.Log(p/ps)
	if math.Abs(l) < 1e-6 {
		return u / g.KV
	}
	x := u / l
	c, d, m := 1/g.KVs, 1/g.KVd-1/g.KVs, 1/g.KV-1/g.KVs
	return u * (c + x*((3*m-d)+x*(d-2*m)))
}
