package measure

import (
	"math"

	"lapwing/internal/window"
)

// What an end takes in by suction follows from its energy balance between a point on the expansion line and one on the
// compression line. With p V for the gas's energy (exponent KV)
//
//	(p V)/KV |  +  (KV − 1)/KV ∫ p dV  =  Zs R (Σ m T + Q/cp)
//
// so that mixing with the rest in the clearance, pressure drop, pulsation, and gas pushed back through valves that are
// held open need no separate account. What is in the sum beside fresh gas at Ts is not seen while the valves are open:
// heat from the walls, gas past the rings and through leaking discharge valves. It goes on in the closed strokes before
// and after, though, and bends their lines. The bends of all strokes of a cylinder are fitted at once with five leaks
// and wall heat, and with what the transmitters, the dead centre and KV may be wrong by. Heat and leaks look much alike
// in the closed strokes, and cost suction much the same: which of them it is stays open, what they cost is known far
// better. Priors keep apart what the strokes do not.

// Unknowns of the fit. The first five are leaks, HS HD CS CD RG as in the leak package, as shares of the mean mass of a
// turn; the last ones are errors.
const (
	inHeat     = 5 // heat by temperature difference
	inWall     = 6 // heat by wall temperature, beside inWallT
	inZero     = 7 // both ends, shares of suction pressure
	inPhase    = 9
	inExponent = 10
	inCount    = 11
)

// inPrior is what each unknown is given beforehand, one standard deviation. A leak of 5 % is rare, one of 10 % not excluded.
// Walls lie between the lines' temperatures, and where is not known better than by a sixth of the rise: with usual heat
// that is 0.02. Transmitters: a stated error of 0.3 % of suction pressure. KV: the equation of state and the bend of the
// real path. The phase is given by the turn's own uncertainty, degrees.
func inPrior(phase float64) [inCount]float64 {
	return [inCount]float64{.03, .03, .03, .03, .03, 1, .02, .003, .003, max(phase, .02), .004}
}

const (
	inBins  = 12    // points that a closed stroke is reduced to
	inSigma = .0015 // scatter of such a point, of ln p: what model and trace do not share
	inWallT = .5    // wall temperature between suction's and adiabatic discharge's
	inRim   = 2     // grid points on either side over which the ends of the balance are smoothed
	inFilm  = .8    // film coefficient goes as p^0.8 T^-0.53 (Woschni 1967, from memory)
	inFilmT = .53
)

// takeIn is the fit of a throw's turn.
type takeIn struct {
	ata  [inCount][inCount]float64
	atb  [inCount]float64
	x    [inCount]float64
	cov  [inCount][inCount]float64
	mass [2]float64          // kg a turn, by energy; NaN unknown
	cost [2][inCount]float64 // kg a turn and unit of an unknown
	why  [2]string
	mean float64 // kg
}

const (
	whyStrokes = "expansion or compression line not found"
	whyPocket  = "the trace fits the clearance of another load step than the one told"
)

// takeIn makes the balance of a throw's ends. It holds until the next turn.
func (m *Measurer) takeIn(c *throwCtx) *takeIn {
	f := &m.in
	*f = takeIn{mass: [2]float64{math.NaN(), math.NaN()}}
	k := c.in.Gas.KV
	n := 0.0
	for e, at := range c.ix.end {
		w := &c.w.Ends[e]
		f.why[e] = whyStrokes
		switch {
		case at < 0 || c.th.P[e] == nil || c.th.Bad[e] != "" || w.NotPresent || w.State == window.Idle || w.State == window.NotDelivering || w.State == window.Lost:
			continue
		case !known(c.in.Ts, c.in.Gas.R, c.in.Gas.Zs, c.in.Gas.KT) || !(k > 1):
			f.why[e] = whyGas
			continue
		case !math.IsNaN(w.Clearance):
			f.why[e] = whyPocket
			continue
		case !w.Closed[0].OK || !w.Closed[1].OK || !(w.Pd > w.Ps) || !allPositive(c.th.P[e]):
			continue
		}
		mass := m.energy(c, f, e, k) / (c.in.Gas.Zs * c.in.Gas.R * c.in.Ts)
		if !(mass > 0) {
			f.why[e] = whyNoWork
			continue
		}
		f.why[e], f.mass[e] = "", mass
		f.mean += f.mass[e]
		n++
	}
	if n == 0 {
		return f
	}
	f.mean /= n
	for e := range f.mass {
		if f.why[e] == "" {
			m.strokes(c, f, e, k)
		}
	}
	f.solve(c.th.U / 2)
	return f
}

// wrap brings a grid index that has run past 360° back into the turn.
func (c *throwCtx) wrap(i int) int {
	if i > c.i1 {
		return i - (c.i1 - c.i0)
	}
	return i
}

// rims gives the grid indices between which the balance of an end is made: just inside the end of the expansion line and
// the start of the compression line that follows, which for the crank end is taken from the turn's beginning.
func (c *throwCtx) rims(e int) (from, to int) {
	w := &c.w.Ends[e]
	from, to = w.Closed[window.Expansion].I1-1-inRim, w.Closed[window.Compression].I0+inRim
	if to < from {
		to += c.i1 - c.i0
	}
	return from, to
}

// energy gives the left side of the balance, J, and books what errors do to it.
func (m *Measurer) energy(c *throwCtx, f *takeIn, e int, k float64) float64 {
	p, v, per := c.th.P[e], c.v[e], 1/(c.in.Gas.Zs*c.in.Gas.R*c.in.Ts)
	slope := func(i int) float64 { return (v[i+1] - v[i-1]) / (2 * c.th.Grid.Step) }
	from, to := c.rims(e)
	var work, turned float64
	for i := from; i < to; i++ {
		a := c.wrap(i)
		mean := (p[a] + p[a+1]) / 2
		work += mean * (v[a+1] - v[a])
		turned += mean * (slope(a+1) - slope(a))
	}
	end := c.wrap(to)
	po, pc := smooth(p, v, from, k), smooth(p, v, end, k)
	stored := pc*v[end] - po*v[from]
	f.cost[e][inZero+e] = c.w.Ends[e].Ps * (v[end] - v[from]) * per
	f.cost[e][inPhase] = ((pc*slope(end)-po*slope(from))/k + (k-1)/k*turned) * per
	f.cost[e][inExponent] = -(work - stored) / (k * k) * per
	return (stored + (k-1)*work) / k
}

// smooth gives the pressure at a point of a closed line from its neighbours.
func smooth(p, v []float64, at int, k float64) float64 {
	sum := 0.0
	for i := at - inRim; i <= at+inRim; i++ {
		sum += p[i] * math.Pow(v[i]/v[at], k)
	}
	return sum / (2*inRim + 1)
}
