package leak

import (
	"math"

	"lapwing/internal/dsp"
)

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
	return s.of(p, lnP, math.Exp((lnP-s.lnPs)*s.n.inv), compressing)
}

// of is at with ln p and (p/Ps)^(1/k) given.
func (s *states) of(p, lnP, a float64, compressing bool) gas {
	inverse := 1 / (p * a) // one division for both
	g := gas{p: p, inv: a * inverse, a: a, invA: p * inverse, lnP: lnP}
	g.rt = s.exp * p * g.invA
	if compressing {
		g.rt = s.comp * p * g.invA
	}
	return g
}

// table keeps the states of a pass: where one end compresses the other expands, and both strokes ask for both.
type table struct {
	gas    [2][]gas
	filled [2][]int // points that have their state

	at         []int // scratch of fill: points and what belongs to them
	p, lnP, aa []float64
}

// forget makes the table ready for other pressures or zeros.
func (t *table) forget(in *Input) {
	for end := range t.gas {
		if n := len(in.P[end]); n > cap(t.gas[end]) {
			t.gas[end] = make([]gas, n)
		} else {
			t.gas[end] = t.gas[end][:cap(t.gas[end])]
			for _, i := range t.filled[end] {
				t.gas[end][i].p = 0
			}
			t.gas[end] = t.gas[end][:n]
		}
		t.filled[end] = t.filled[end][:0]
	}
}

// of gives an end's states on the grid, with those of a stroke's points in place. A point lies in strokes of one
// direction only.
func (t *table) of(in *Input, s *states, end int, r Range, every int, zero float64, compressing bool) []gas {
	all := t.gas[end]
	t.at, t.p = t.at[:0], t.p[:0]
	for i := r.From; i < r.To; i += every {
		if all[i].p == 0 {
			t.at, t.p = append(t.at, i), append(t.p, in.P[end][i]-zero)
		}
	}
	if n := len(t.p); n > cap(t.lnP) {
		t.lnP, t.aa = make([]float64, n, 2*n), make([]float64, n, 2*n)
	}
	lnP, a := t.lnP[:len(t.p)], t.aa[:len(t.p)]
	dsp.Logs(lnP, t.p)
	for j, l := range lnP {
		a[j] = float64((l - s.lnPs) * s.n.inv)
	}
	dsp.Exps(a, a)
	for j, i := range t.at {
		all[i] = s.of(t.p[j], lnP[j], a[j], compressing)
	}
	t.filled[end] = append(t.filled[end], t.at...)
	return all
}

// rate gives g: how fast ln p of an end in state in rises per radian, per m² and per k, through an opening to a place
// in state out. perVOmega is one over the end's volume times the shaft speed.
func (s *states) rate(in, out *gas, perVOmega float64) float64 {
	if in.p >= out.p {
		return -math.Sqrt(in.rt*s.n.square(out.p*in.inv, out.a*in.invA)) * perVOmega
	}
	return math.Sqrt(out.rt*s.n.square(in.p*out.inv, in.a*out.invA)) * out.p * in.inv * perVOmega
}
