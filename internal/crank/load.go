package crank

import (
	"fmt"
	"math"
)

// Pressure is one end's pressure over an angle grid, Pa absolute: P per grid point, or, where the end has no
// transducer (P nil), the constant Held for the whole turn, e.g. suction pressure behind an unloaded valve or
// atmospheric pressure in an open end.
type Pressure struct {
	P    []float64
	Held float64
}

func (p Pressure) at(i int) float64 {
	if p.P == nil {
		return p.Held
	}
	return p.P[i]
}

// Loads are the forces along the piston rod over a grid, N; compression of the rod (force towards the crank) is
// positive.
//
//   - Gas: what the gas alone does to the piston, p_HE·A_HE − p_CE·A_CE − p_atm·(A_HE − A_CE).
//   - Rod: gas and the inertia of piston and rod, i.e. the load in the rod at the crosshead.
//   - Pin: gas and the inertia of everything on the far side of the crosshead pin: the combined rod load that
//     API 618 judges.
//
// Friction and the rod's weight are left out.
type Loads struct {
	Gas, Rod, Pin []float64
}

// Motion holds the derivatives of the travel by the angle on a grid, which cost more than everything else in a rod
// load. Who works out the loads of turn after turn keeps one; the zero value is ready.
type Motion struct {
	stroke, conRod, lo, step float64
	d1, d2                   []float64 // m/rad, m/rad²
}

// lay fills it in for a cylinder and n grid points at lo, lo+step, … degrees, when it is not that already.
func (m *Motion) lay(c *Cylinder, lo, step float64, n int) {
	if len(m.d1) == n && m.stroke == c.Stroke && m.conRod == c.ConRod && m.lo == lo && m.step == step {
		return
	}
	m.stroke, m.conRod, m.lo, m.step = c.Stroke, c.ConRod, lo, step
	m.d1, m.d2 = sized(m.d1, n), sized(m.d2, n)
	for i := range n {
		m.d1[i], m.d2[i] = c.slope(lo + float64(i)*step)
	}
}

// RodLoads fills l for n grid points at lo, lo+step, … degrees, reusing its slices; m may be nil. omega is the shaft speed in
// rad/s, one per grid point or a single value for an even speed; with one per point the angular acceleration is
// taken from it, ω·dω/dθ. pAtm is the pressure on the outside of the rods, Pa absolute.
func (c Cylinder) RodLoads(l *Loads, m *Motion, he, ce Pressure, lo, step float64, n int, pAtm float64, omega []float64) error {
	for end, p := range [2]Pressure{he, ce} {
		if p.P != nil && len(p.P) != n {
			return fmt.Errorf("crank: rod load: %s pressure has %d points, the grid has %d", endName(end), len(p.P), n)
		}
	}
	if len(omega) != n && len(omega) != 1 {
		return fmt.Errorf("crank: rod load: %d speeds for %d grid points", len(omega), n)
	}
	if m == nil {
		m = new(Motion)
	}
	m.lay(&c, lo, step, n)
	l.Gas, l.Rod, l.Pin = sized(l.Gas, n), sized(l.Rod, n), sized(l.Pin, n)
	areaHE, areaCE := c.Area(HE), c.Area(CE)
	for i := range n {
		w, alpha := omega[0], 0.0
		if len(omega) > 1 {
			w = omega[i]
			a, b := max(i-1, 0), min(i+1, n-1)
			alpha = w * (omega[b] - omega[a]) / (float64(b-a) * step * radPerDeg)
		}
		acc := m.d2[i]*w*w + m.d1[i]*alpha // as Accel
		gas := (he.at(i)-pAtm)*areaHE - (ce.at(i)-pAtm)*areaCE
		l.Gas[i] = gas
		l.Rod[i] = gas - c.MassPiston*acc
		l.Pin[i] = gas - (c.MassPiston+c.MassCrosshead)*acc
	}
	return nil
}

func sized(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}

func endName(end int) string {
	if end == CE {
		return "crank-end"
	}
	return "head-end"
}

// Reversal tells how a load changes its direction over one turn. A crosshead pin that is always pressed to the same
// side of its bushing is not fed with oil.
type Reversal struct {
	MaxCompression float64 // N, largest load in compression, 0 when there is none
	MaxTension     float64 // N, largest load in tension as a positive number, 0 when there is none
	Degrees        float64 // crank degrees spent in the direction of the shorter stay
	Longest        float64 // the longest unbroken part of them
	Share          float64 // peak of the lesser direction over the peak of the greater, 0..1
}

// Least values of reversal that API 618 (5th ed., 6.6.4; from memory, editions differ) asks of the pin load.
const (
	LeastReversalDeg   = 15.0
	LeastReversalShare = 0.03
)

// OK reports whether an unbroken reversal lasts minDeg degrees and reaches minShare of the greater peak.
func (r Reversal) OK(minDeg, minShare float64) bool {
	return r.Longest >= minDeg && r.Share >= minShare
}

// Reverse finds the reversal of a load given at equal steps over exactly one turn: the last point lies one step before
// the first one's repetition. Changes of sign are placed between the points by straight lines. Fewer than two
// points, or a NaN among them, give NaN in every field: the reversal is not known.
func Reverse(load []float64) Reversal {
	var r Reversal
	n := len(load)
	sum := 0.0
	for _, v := range load {
		r.MaxCompression = max(r.MaxCompression, v)
		r.MaxTension = max(r.MaxTension, -v)
		sum += v
	}
	if n < 2 || math.IsNaN(sum) {
		nan := math.NaN()
		return Reversal{nan, nan, nan, nan, nan}
	}
	if top := max(r.MaxCompression, r.MaxTension); top > 0 {
		r.Share = min(r.MaxCompression, r.MaxTension) / top
	}

	step := 360 / float64(n)
	total, longest := stay(load, step, +1)
	if t, m := stay(load, step, -1); t < total {
		total, longest = t, m
	}
	r.Degrees, r.Longest = total, longest
	return r
}

// stay gives the degrees during which sign*load > 0, in all and in the longest unbroken run (which may pass 360°).
func stay(load []float64, step, sign float64) (total, longest float64) {
	n := len(load)
	start := -1 // a point outside the run, so that no run is cut in two by the seam
	for i, v := range load {
		if sign*v <= 0 {
			start = i
			break
		}
	}
	if start < 0 {
		return 360, 360
	}
	run := 0.0
	b := sign * load[start]
	for i := start; ; {
		if i++; i == n {
			i = 0
		}
		a := b
		b = sign * load[i]
		switch {
		case a > 0 && b > 0:
			run += step
		case a > 0: // leaves
			run += step * a / (a - b)
			total += run
			longest = max(longest, run)
			run = 0
		case b > 0: // enters
			run = step * b / (b - a)
		}
		if i == start {
			return total, longest
		}
	}
}
