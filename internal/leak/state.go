package leak

import "math"

// gas is the state inside an end as the flow through an opening needs it. One logarithm and one exponential a point
// give all of it: p^((k−1)/k) is p over p^(1/k).
type gas struct {
	p, inv  float64 // Pa and its inverse
	a, invA float64 // (p/Ps)^(1/k) and its inverse
	rt      float64 // R·T, J/kg: an estimate, it enters as a square root only
	lnP     float64
}

// states holds what is the same for every point of a fit.
type states struct {
	n                  nozzle
	lnPs               float64
	comp, exp          float64 // R·T/(p/a) while compressing and while expanding
	suction, discharge gas
}

func (in *Input) states() states {
	s := states{n: newNozzle(in.K), lnPs: math.Log(in.Ps)}
	aD := math.Pow(in.Pd/in.Ps, s.n.inv)
	s.suction = gas{p: in.Ps, inv: 1 / in.Ps, a: 1, invA: 1, rt: in.RZ * in.Ts}
	s.discharge = gas{p: in.Pd, inv: 1 / in.Pd, a: aD, invA: 1 / aD, rt: in.RZ * in.Td}
	// While compressing, a little warmer than the suction line at the start; while expanding, the discharge gas expanded.
	s.comp = in.RZ * 1.03 * in.Ts / in.Ps
	s.exp = in.RZ * in.Td / in.Pd * aD
	return s
}

// at gives the state at pressure p.
func (s *states) at(p float64, compressing bool) gas {
	lnP := math.Log(p)
	a := math.Exp((lnP - s.lnPs) * s.n.inv)
	g := gas{p: p, inv: 1 / p, a: a, invA: 1 / a, lnP: lnP}
	g.rt = s.exp * p * g.invA
	if compressing {
		g.rt = s.comp * p * g.invA
	}
	return g
}

// table keeps the states of a pass: where one end compresses the other expands, and both strokes ask for both.
type table [2][]gas

// forget makes the table ready for other pressures or zeros.
func (t *table) forget(in *Input) {
	for end := range t {
		if n := len(in.P[end]); n > cap(t[end]) {
			t[end] = make([]gas, n)
		} else {
			t[end] = t[end][:n]
			clear(t[end])
		}
	}
}

// at gives the state of an end at a grid point. A point lies in strokes of one direction only.
func (t *table) at(in *Input, s *states, end, i int, zero float64, compressing bool) *gas {
	g := &t[end][i]
	if g.p == 0 {
		*g = s.at(in.P[end][i]-zero, compressing)
	}
	return g
}

// rate gives g: how fast ln p of an end in state in rises per radian, per m² and per k, through an opening to a place
// in state out. perVOmega is one over the end's volume times the shaft speed.
func (s *states) rate(in, out *gas, perVOmega float64) float64 {
	if in.p >= out.p {
		return -math.Sqrt(in.rt*s.n.square(out.p*in.inv, out.a*in.invA)) * perVOmega
	}
	return math.Sqrt(out.rt*s.n.square(in.p*out.inv, in.a*out.invA)) * out.p * in.inv * perVOmega
}
