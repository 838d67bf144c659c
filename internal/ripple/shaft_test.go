package ripple

import (
	"math"
	"sort"

	"lapwing/internal/crank"
	"lapwing/internal/frame"
	"lapwing/internal/turn"
)

const rad = math.Pi / 180

// load is what one throw of the test machine does: the loss-free cycle of both ends, or an end held open.
type load struct {
	ps, pd float64
	idle   [2]bool
}

// press gives an end's pressure of the loss-free cycle: polytropic strokes between two lines. Written out here from
// the textbook, so that the shaft of these tests owes nothing to the package under test.
func (l load) press(c crank.Cylinder, end int, deg float64) float64 {
	const n = 1.30
	if l.idle[end] {
		return l.ps
	}
	r, rod := c.Stroke/2, c.ConRod
	x := r*(1-math.Cos(deg*rad)) + rod - math.Sqrt(rod*rod-r*r*math.Pow(math.Sin(deg*rad), 2))
	out := math.Mod(deg+720, 360) < 180 // the piston goes towards the crank
	if end == 1 {
		x, out = c.Stroke-x, !out
	}
	v, least := x/c.Stroke+c.Clearance[end], c.Clearance[end]
	if out {
		return math.Max(l.ps, l.pd*math.Pow(least/v, n))
	}
	return math.Min(l.pd, l.ps*math.Pow((1+least)/v, n))
}

// shaft is one period of a shaft under the torque of its throws, solved by energy without any small-ripple
// approximation: ½(J + Σ m x′²)ω² = E(θ), dE/dθ = gas torque + a constant driver torque that closes the period.
type shaft struct {
	time   []float64 // s from the mark to k·fine degrees; the last entry is the period
	period float64
}

const fine = 0.05 // degrees

func solve(m Machine, loads []load, rpm float64) *shaft {
	n := int(math.Round(360 / fine))
	work, inertia := make([]float64, n+1), make([]float64, n+1)
	torque := func(deg float64) (gas, j float64) {
		j = m.Inertia
		for k, t := range m.Throws {
			c, at := t.Cylinder, deg-t.DeadCentreDeg
			r := c.Stroke / 2
			q := math.Sqrt(c.ConRod*c.ConRod - r*r*math.Pow(math.Sin(at*rad), 2))
			x1 := r*math.Sin(at*rad) + r*r*math.Sin(at*rad)*math.Cos(at*rad)/q
			he, ce := math.Pi/4*c.Bore*c.Bore, math.Pi/4*(c.Bore*c.Bore-c.PistonRod*c.PistonRod)
			f := (loads[k].press(c, 0, at)-m.Atmosphere)*he - (loads[k].press(c, 1, at)-m.Atmosphere)*ce
			gas += f * x1
			j += (c.MassPiston + c.MassCrosshead) * x1 * x1
		}
		return gas, j
	}
	last, j := torque(0)
	inertia[0] = j
	for i := 1; i <= n; i++ {
		g, j := torque(float64(i) * fine)
		work[i] = work[i-1] + (last+g)/2*fine*rad
		inertia[i], last = j, g
	}
	drive := -work[n] / float64(n)
	s := &shaft{time: make([]float64, n+1)}
	energy := j * math.Pow(rpm*math.Pi/30, 2) / 2
	for range 40 { // the energy at the mark that gives the wanted mean speed
		for i := 1; i <= n; i++ {
			w0 := math.Sqrt(2 * (energy + work[i-1] + drive*float64(i-1)) / inertia[i-1])
			w1 := math.Sqrt(2 * (energy + work[i] + drive*float64(i)) / inertia[i])
			s.time[i] = s.time[i-1] + 2*fine*rad/(w0+w1)
		}
		s.period = s.time[n]
		energy *= math.Pow(s.period*rpm/60, 2)
	}
	return s
}

// at gives the time of an angle within one turn.
func (s *shaft) at(deg float64) float64 {
	turns := math.Floor(deg / 360)
	x := (deg - 360*turns) / fine
	i := min(int(x), len(s.time)-2)
	return turns*s.period + s.time[i] + (x-float64(i))*(s.time[i+1]-s.time[i])
}

// angle is the way back.
func (s *shaft) angle(t float64) float64 {
	turns := math.Floor(t / s.period)
	t -= turns * s.period
	i := min(max(sort.SearchFloat64s(s.time, t), 1), len(s.time)-1)
	return 360*turns + (float64(i-1)+(t-s.time[i-1])/(s.time[i]-s.time[i-1]))*fine
}

// run is a machine running through consecutive loads, each for so many turns: the truth, and its frames.
type run struct {
	rate   float64
	starts []float64 // s, of each stretch
	first  []int     // turn number of each stretch's first
	shafts []*shaft
	loads  [][]load
	turns  int
}

func newRun(m Machine, rate, rpm float64, each int, loads ...[]load) *run {
	r := &run{rate: rate, loads: loads}
	at := 10.3 / rate
	for i, l := range loads {
		s := solve(m, l, rpm)
		r.shafts, r.starts, r.first = append(r.shafts, s), append(r.starts, at), append(r.first, i*each)
		at += float64(each) * s.period
	}
	r.turns = each * len(loads)
	return r
}

func (r *run) stretch(turn int) int {
	return max(sort.SearchInts(r.first, turn+1)-1, 0)
}

// position gives the sample position of a shaft angle counted from the first mark.
func (r *run) position(deg float64) float64 {
	k := r.stretch(int(math.Floor(deg / 360)))
	return r.rate * (r.starts[k] + r.shafts[k].at(deg-360*float64(r.first[k])))
}

func (r *run) frame(m Machine, n, marks int) *frame.Frame {
	f := &frame.Frame{Turn: int64(n), Mark0: r.position(360 * float64(n)), Mark1: r.position(360 * float64(n+1))}
	for k := 1; k < marks; k++ {
		f.Inner = append(f.Inner, r.position(360*(float64(n)+float64(k)/float64(marks))))
	}
	f.Seq0 = int64(math.Floor(f.Mark0))
	f.Counts = make([][]int32, 2*len(m.Throws))
	for i := f.Seq0; float64(i) < f.Mark1; i++ {
		k := r.stretch(n)
		deg := r.shafts[k].angle(float64(i)/r.rate - r.starts[k])
		for j, t := range m.Throws {
			for e := range 2 {
				f.Counts[2*j+e] = append(f.Counts[2*j+e], int32(r.loads[k][j].press(t.Cylinder, e, deg-t.DeadCentreDeg)))
			}
		}
	}
	return f
}

// config gives the converter's configuration for a machine whose input 2k+e is end e of throw k in Pa.
func config(m Machine, rate float64) turn.Config {
	cfg := turn.Config{Rate: rate, Step: 0.5}
	for k, t := range m.Throws {
		tc := turn.ThrowConfig{DeadCentreDeg: t.DeadCentreDeg}
		for e := range 2 {
			tc.Pressure[e] = turn.Channel{Input: 2*k + e, Gain: 1}
		}
		cfg.Throws = append(cfg.Throws, tc)
	}
	return cfg
}
