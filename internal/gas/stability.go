package gas

import (
	"math"
	"slices"
)

// lnFugacity gives ln φ_i of every component present, from the composition derivative of nα^r
// (Kunz and Wagner 2012, the relations for ∂(nα^r)/∂n_i):
// ln φ_i = α^r + n ∂α^r/∂n_i − ln Z,
// n ∂α^r/∂n_i = δα_δ (1 + n ∂ln v_r/∂n_i) + τα_τ n ∂ln T_r/∂n_i + α_i − Σ x_k α_k.
func (s *isotherm) lnFugacity(density float64) (lnPhi [nComponents]float64) {
	_, _, dv, dt := s.reducing(true)
	var ax [nComponents]float64 // ∂α^r/∂x_i at constant δ, τ
	res := s.residual(density, func(g *group, r residual) {
		if g.j < 0 {
			ax[g.i] += r.a
			return
		}
		f := s.co.pair[g.i][g.j].f * r.a
		ax[g.i] += s.x[g.j] * f
		ax[g.j] += s.x[g.i] * f
	})
	var sumV, sumT, sumA float64
	for i, x := range s.x {
		sumV += x * dv[i]
		sumT += x * dt[i]
		sumA += x * ax[i]
	}
	lnZ := math.Log(1 + res.d)
	for i, x := range s.x {
		if x == 0 {
			continue
		}
		nv := (dv[i] - sumV) / s.vr
		nt := (dt[i] - sumT) / s.tr
		lnPhi[i] = res.a + res.d*(1+nv) + res.t*nt + ax[i] - sumA - lnZ
	}
	return lnPhi
}

// Bounds of the search for a condensed phase.
const (
	trialPhases     = 3
	trialIterations = 40
)

// condenses reports whether a liquid of some composition would be more stable than the gas at this density:
// Michelsen's tangent plane test (Fluid Phase Equilib. 9 (1982) 1, from memory) by successive substitution, started
// from the liquid of the gas's own composition and from the nearly pure liquids of its least volatile components. A
// search that does not come to rest proves nothing and counts as no.
func (s *isotherm) condenses(p, density float64) bool {
	lnPhi := s.lnFugacity(density)
	var goal [nComponents]float64
	var heavy []int
	for i, x := range s.x {
		if x == 0 {
			continue
		}
		goal[i] = math.Log(x) + lnPhi[i]
		if s.co.comp[i].tc > s.t { // only such a component can be liquid by itself
			heavy = append(heavy, i)
		}
	}
	if len(heavy) == 0 {
		return false
	}
	if s.trial(p, density, goal, s.x) {
		return true
	}
	slices.SortStableFunc(heavy, func(i, j int) int {
		a, b := goal[i]+s.attraction(i), goal[j]+s.attraction(j)
		switch {
		case a > b:
			return -1
		case a < b:
			return 1
		}
		return 0
	})
	for _, i := range heavy[:min(trialPhases, len(heavy))] {
		var y [nComponents]float64
		for j, x := range s.x {
			if x > 0 {
				y[j] = .02 * x
			}
		}
		y[i] += .98
		if s.trial(p, density, goal, y) {
			return true
		}
	}
	return false
}

// attraction is a rough −ln(saturation pressure / critical pressure) of a pure component (the corresponding-states
// slope 5.37 of simple fluids); it only orders the trials.
func (s *isotherm) attraction(i int) float64 { return 5.37 * (s.co.comp[i].tc/s.t - 1) }

// trial follows one trial phase from composition y and reports whether it ends below the tangent plane.
func (s *isotherm) trial(p, density float64, goal, y [nComponents]float64) bool {
	near := 0.0 // mol/m³, of the trial before
	for range trialIterations {
		sum := 0.0
		for _, v := range y {
			sum += v
		}
		for i := range y {
			y[i] /= sum
		}
		ph := newBlend(s.co, y).at(s.t)
		d, ok := ph.liquidRoot(p, near)
		if !ok {
			return false // this trial boils away
		}
		near = d
		lnPhi := ph.lnFugacity(d)
		var next [nComponents]float64
		total, away, change := 0.0, 0.0, 0.0
		for i, x := range s.x {
			if x == 0 {
				continue
			}
			next[i] = math.Exp(goal[i] - lnPhi[i])
			total += next[i]
		}
		for i, x := range s.x {
			v := next[i] / total
			away = max(away, math.Abs(v-x))
			change = max(change, math.Abs(v-y[i]))
		}
		if away < 1e-3 && math.Abs(d/density-1) < 1e-2 {
			return false // fell back to the gas itself
		}
		if change < 1e-6 || change < 1e-3 && math.Abs(total-1) > 0.1 { // far from the plane a rough answer is enough
			return total > 1+1e-6
		}
		y = next
	}
	return false
}
