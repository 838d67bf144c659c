package datum

import (
	"fmt"
	"math"

	"lapwing/internal/crank"
)

// Unknowns of the estimate.
const (
	uShift = iota // rad
	uClearHE
	uClearCE
	uZeroHE // shares of the lowest Ps
	uZeroCE
	uK
	uHeat // ln of the factor
	uWall
	uOnce    // share by which heat transfer changes once a turn: more near the dead centre of least volume
	uTwice   // and twice a turn: more near both
	uWarm    // of the suction temperature: how much warmer the gas is while expanding than while compressing
	uArea    // Paths of them, in units of the area that leaks 1 % of throughput
	unknowns = uArea + Paths
)

type vector [unknowns]float64

// stroke is one closed stroke of one duty, thinned out.
type stroke struct {
	duty, end, kind int
	at              []int // grid points
}

// Window of a stroke in shares of ln(Pd/Ps), and the degrees kept from its dead centre (leaks.md section 1).
const (
	lowShare, highShare = .05, .95
	pastDeadCentre      = 4.0
	leastPoints         = 10
	mostPoints          = 48
)

func (in *Input) deg(i int) float64 { return in.Lo + float64(i)*in.Step }

// compressing reports whether an end's volume falls at an angle.
func compressing(end int, deg float64) bool {
	half := math.Mod(math.Mod(deg, 360)+360, 360)
	return (end == crank.HE) == (half >= 180)
}

// strokes finds the usable part of every closed run.
func (in *Input) strokes() (list []stroke) {
	for d := range in.Duties {
		y := &in.Duties[d]
		span := math.Log(y.Pd / y.Ps)
		for end, p := range y.P {
			if p == nil {
				continue
			}
			other := y.P[1-end]
			for kind, r := range y.Closed[end] {
				from, to := max(r.From, 0), min(r.To, len(p))
				inside := func(i int) bool {
					deg := in.deg(i)
					share := math.Log(p[i]/y.Ps) / span // NaN of no pressure: outside
					past := math.Mod(math.Mod(deg, 180)+180, 180)
					return share >= lowShare && share <= highShare && past >= pastDeadCentre && compressing(end, deg) == (kind == Compression)
				}
				for from < to && !inside(from) {
					from++
				}
				for to > from && !inside(to-1) {
					to--
				}
				sound := true
				for i := from; i < to; i++ {
					sound = sound && p[i] > 0 && (other == nil || other[i] > 0)
				}
				if !sound || to-from < leastPoints {
					continue
				}
				s := stroke{duty: d, end: end, kind: kind}
				for i := from; i < to; i += 1 + (to-from-1)/mostPoints {
					s.at = append(s.at, i)
				}
				list = append(list, s)
			}
		}
	}
	return list
}

func (in *Input) check() error {
	if err := in.Cylinder.Validate(); err != nil {
		return fmt.Errorf("datum: %w", err)
	}
	if !(in.Step > 0) || math.IsInf(in.Step+in.Lo, 0) {
		return fmt.Errorf("datum: the grid's step is %g", in.Step)
	}
	if len(in.Duties) == 0 {
		return fmt.Errorf("datum: no duty")
	}
	n := -1
	for i := range in.Duties {
		d := &in.Duties[i]
		for _, p := range d.P {
			if p == nil {
				continue
			}
			if n < 0 {
				n = len(p)
			}
			if len(p) != n {
				return fmt.Errorf("datum: duty %d: %d pressures on a grid of %d", i+1, len(p), n)
			}
		}
		switch {
		case n < 0:
			return fmt.Errorf("datum: duty %d: no pressure", i+1)
		case !(d.Ps > 0 && d.Pd > d.Ps && d.Ts > 0) || math.IsInf(d.Pd+d.Ts, 0):
			return fmt.Errorf("datum: duty %d: line conditions not usable (Ps %g Pa, Pd %g Pa, Ts %g K)", i+1, d.Ps, d.Pd, d.Ts)
		case !(d.K > 1 && d.K < 2 && d.RZ > 0) || math.IsInf(d.RZ, 0):
			return fmt.Errorf("datum: duty %d: gas not usable (k %g, RZ %g J/(kg K))", i+1, d.K, d.RZ)
		case len(d.Omega) != 1 && len(d.Omega) != n:
			return fmt.Errorf("datum: duty %d: %d speeds for a grid of %d", i+1, len(d.Omega), n)
		}
		for _, w := range d.Omega {
			if !(w > 0) {
				return fmt.Errorf("datum: duty %d: shaft speed %g rad/s", i+1, w)
			}
		}
	}
	return nil
}

func (d *Duty) omega(i int) float64 {
	if len(d.Omega) == 1 {
		return d.Omega[0]
	}
	return d.Omega[i]
}

// psi is the nozzle function of the pressure ratio r <= 1, choked at its limit and smoothed where the flow turns round
// (leaks.md section 1).
func psi(r, k float64) float64 {
	d := 1 - r
	r = math.Max(r, math.Pow(2/(k+1), k/(k-1)))
	a := math.Pow(r, 1/k)
	return math.Sqrt(2*k/(k-1)*a*math.Max(a-r, 0)) * math.Sqrt(d/(d+.002))
}

// gasT is the gas's temperature at pressure p, an estimate: while compressing a little warmer than the suction line at the
// start; while expanding what was compressed so, expanded again.
func (d *Duty) gasT(p float64) float64 {
	return 1.03 * d.Ts * math.Pow(p/d.Ps, (d.K-1)/d.K)
}

// inflow gives dY/dθ/k for an opening of 1 m² to a place at pressure q and temperature tq, per radian.
func (d *Duty) inflow(p, t, q, tq, v, omega float64) float64 {
	if p >= q {
		return -math.Sqrt(d.RZ*t) * psi(q/p, d.K) / (v * omega)
	}
	return math.Sqrt(d.RZ*tq) * q / p * psi(p/q, d.K) / (v * omega)
}

// areaOfPercent is the area of each path that leaks one per cent of the end's suction volume per turn at a duty (rings:
// of both ends'), m². Sealed polytropic strokes between the lines are good enough for a prior.
func (in *Input) areaOfPercent(d *Duty) (a [Paths]float64) {
	const steps = 90
	w := d.omega(0)
	td := d.gasT(d.Pd)
	var mass [Paths]float64
	press := func(end int, deg float64) float64 {
		c := in.Cylinder
		c.Clearance[end] += d.Pocket[end]
		v := c.Volume(end, deg)
		if compressing(end, deg) {
			return math.Min(d.Pd, d.Ps*math.Pow((c.ClearanceVolume(end)+c.Swept(end))/v, d.K))
		}
		return math.Max(d.Ps, d.Pd*math.Pow(c.ClearanceVolume(end)/v, d.K))
	}
	flow := func(p, t, q, tq float64) float64 { // per m², either way
		if p < q {
			p, t, q = q, tq, p
		}
		return p * psi(q/p, d.K) / math.Sqrt(d.RZ*t)
	}
	for i := range steps {
		deg := (float64(i) + .5) * 360 / steps
		dt := 2 * math.Pi / steps / w
		ph, pc := press(crank.HE, deg), press(crank.CE, deg)
		for end, p := range [2]float64{ph, pc} {
			mass[HS+2*end] += dt * flow(p, d.gasT(p), d.Ps, d.Ts)
			mass[HD+2*end] += dt * flow(p, d.gasT(p), d.Pd, td)
		}
		switch { // one end without a transducer
		case d.P[crank.CE] == nil:
			pc = in.Beyond
		case d.P[crank.HE] == nil:
			ph = in.Beyond
		}
		if ph > 0 && pc > 0 {
			mass[RG] += dt * flow(ph, d.gasT(ph), pc, d.gasT(pc))
		}
	}
	for j := range a {
		end := j / 2 % 2
		through := .7 * d.Ps * in.Cylinder.Swept(end) / (d.RZ * d.Ts)
		if mass[j] > 0 {
			a[j] = .01 * through / mass[j]
		}
	}
	return a
}
