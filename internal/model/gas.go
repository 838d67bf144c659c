package model

import (
	"fmt"
	"math"

	"lapwing/internal/gas"
	"lapwing/internal/skid"
)

// gasOf takes the constants of the skid's gas at the duty of a line.
func gasOf(sk *skid.Skid, ln skid.Line) (Gas, error) {
	if !(ln.Ps > 0 && ln.Pd > ln.Ps && ln.Ts > 0) {
		return Gas{}, fmt.Errorf("model: line pressures %g and %g Pa at %g K give no duty", ln.Ps, ln.Pd, ln.Ts)
	}
	g := Gas{Viscosity: 1.1e-5, Prandtl: 0.72}
	d, err := sk.Gas.Duty(ln.Ps, ln.Ts, ln.Pd)
	if err != nil {
		return g, fmt.Errorf("model: gas: %w", err)
	}
	g.R, g.K, g.KT = d.R*d.Zs, d.KV, d.KT
	return g, nil
}

// Distances between the duties at which a gas map is computed: the exponents are smooth, so that what lies between
// follows linearly to a few parts in 10⁴.
const (
	nodeLnP   = 0.10 // of suction pressure
	nodeLnPR  = 0.12 // of the pressure ratio
	nodeT     = 8.0  // K
	leastLnPR = 0.02
)

// gasMap gives the constants of a real gas at any duty, from nodes that are computed when first needed (a duty costs
// milliseconds). Its answers do not depend on the order of the questions.
type gasMap struct {
	of    *gas.Mixture
	nodes map[[3]int]Gas
}

// newGasMap gives nil for a gas that is the same at every duty.
func newGasMap(sk *skid.Skid) *gasMap {
	if sk.Gas.Mixture == nil {
		return nil
	}
	return &gasMap{of: sk.Gas.Mixture, nodes: map[[3]int]Gas{}}
}

// at gives R·Z at suction, K and KT at the duty of a line; not ok where the gas cannot be computed (it would condense).
func (g *gasMap) at(l skid.Line) (Gas, bool) {
	x := [3]float64{math.Log(l.Ps) / nodeLnP, max(math.Log(l.Pd/l.Ps), leastLnPR) / nodeLnPR, l.Ts / nodeT}
	var i [3]int
	var f [3]float64
	for k := range x {
		fl := math.Floor(x[k])
		i[k], f[k] = int(fl), x[k]-fl
	}
	var out Gas
	for c := range 8 {
		w, key := 1.0, i
		for k := range 3 {
			if c>>k&1 == 1 {
				key[k]++
				w *= f[k]
			} else {
				w *= 1 - f[k]
			}
		}
		n, ok := g.node(key)
		if !ok {
			return Gas{}, false
		}
		out.R += w * n.R
		out.K += w * n.K
		out.KT += w * n.KT
		out.slope += w * n.slope
	}
	return out, true
}

func (g *gasMap) node(key [3]int) (Gas, bool) {
	n, known := g.nodes[key]
	if !known {
		ps := math.Exp(float64(key[0]) * nodeLnP)
		lnPR := max(float64(key[1])*nodeLnPR, leastLnPR)
		path, err := g.of.Isentropic(float64(key[2])*nodeT, ps, ps*math.Exp(lnPR))
		if err == nil {
			n = Gas{R: g.of.R() * path.From.Z, K: path.KV, KT: path.KT, slope: (path.To.KappaV - path.From.KappaV) / lnPR}
		}
		g.nodes[key] = n
	}
	return n, n.R > 0
}

// nozzleStep is the change of the exponent at which a stage's nozzle table is made anew: flow changes by less than
// 0.2 per cent between.
const nozzleStep = 0.005

// follow gives the stage the gas of its present line: what Params says, moved by as much as the real gas moves from the
// duty for which Params was made, and by what the script makes of it. Where the gas cannot be computed, the last that
// could be holds.
func (s *stage) follow(m *Machine, l skid.Line, t float64) {
	other, weight := m.plan.exponent.at(t), m.plan.weight.at(t)
	if l == s.line && other == s.other && weight == s.weight {
		return
	}
	if l != s.line && m.gases != nil && (l != m.base || m.gas0.R > 0 || m.par.RealPath) {
		if m.gas0.R == 0 {
			m.gas0, _ = m.gases.at(m.base)
		}
		if g, ok := m.gases.at(l); ok && m.gas0.R > 0 {
			s.real = Gas{R: m.par.Gas.R * (g.R / m.gas0.R), K: m.par.Gas.K + (g.K - m.gas0.K), KT: m.par.Gas.KT}
			if m.par.Gas.KT != 0 {
				s.real.KT += g.KT - m.gas0.KT
			}
			if m.par.RealPath {
				s.real.slope, s.mid = g.slope, math.Sqrt(l.Ps*l.Pd)
			}
		}
	}
	s.line, s.other, s.weight = l, other, weight
	s.gas.R, s.gas.K, s.gas.KT, s.gas.slope = s.real.R/weight, s.real.K+other, s.real.KT, s.real.slope
	if s.gas.KT != 0 {
		s.gas.KT += other
	}
	if math.Abs(s.gas.K-s.noz.k) > nozzleStep {
		s.noz = newNozzle(s.gas.K)
	}
}
