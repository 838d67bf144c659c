package frame

import "math"

// unsureScat is the scatter supposed until it is known, in pitches.
const unsureScat = 0.15

// pace is how many accepted marks the local speed is taken from.
const pace = 9

// follower knows which tooth passed last and how fast they come, and says which one a new edge is.
type follower struct {
	at   []float64 // places of the marks in pitches, mark 0 to the next turn's mark 0
	last int       // mark that passed last
	pos  float64   // its sample position
	sum  float64   // pitches passed since the start of following
	scat float64   // mean distance of marks from where they were expected, pitches
	ps   [pace]float64
	th   [pace]float64
	n    int
	bias []float64 // nil, or how late each mark comes of itself, in pitches
}

func (f *follower) begin(at []float64, mark int, pos, pitch float64) {
	*f = follower{at: at, last: mark, pos: pos, scat: unsureScat}
	f.ps[0], f.th[0] = pos-pitch, -1
	f.ps[1] = pos
	f.n = 2
}

// ahead gives the pitches from the last mark to the one steps after it.
func (f *follower) ahead(steps int) float64 {
	n := len(f.at) - 1
	i := f.last + steps
	return f.at[i%n] + float64(i/n)*f.at[n] - f.at[f.last]
}

// speed gives the samples per pitch over the last marks and its relative change from pitch to pitch.
func (f *follower) speed() (pitch, trend float64) {
	i := max(0, f.n-1-4)
	d := f.th[f.n-1] - f.th[i]
	pitch = (f.ps[f.n-1] - f.ps[i]) / d
	if i == 0 || f.n < pace {
		return pitch, 0
	}
	e := f.th[i] - f.th[0]
	t := math.Log(pitch / ((f.ps[i] - f.ps[0]) / e))
	t = math.Copysign(max(0, math.Abs(t)-2*f.scat), t)
	return pitch, min(max(2*t/(d+e), -0.1), 0.1)
}

// due gives the samples from the last mark until dist pitches have passed. The speed is that of the middle of the marks
// it was taken from; it is carried on along its trend.
func (f *follower) due(dist, pitch, trend float64) float64 {
	i := max(0, f.n-1-4)
	lag := (f.th[f.n-1] - f.th[i]) / 2
	return pitch * dist * (1 + trend*(lag+dist/2))
}

// near finds the mark that an edge at pos is nearest to: steps marks after the last one (0: the last one itself) and
// how late, in pitches.
func (f *follower) near(pos float64, most int) (steps int, late float64) {
	pitch, trend := f.speed()
	x := pos - f.pos
	steps, late = 0, x/pitch
	best := math.Abs(late)
	for s := 1; s <= most; s++ {
		l := (x - f.due(f.ahead(s), pitch, trend)) / pitch
		if f.bias != nil && s == 1 {
			l -= f.bias[(f.last+1)%(len(f.at)-1)]
		}
		miss := math.Abs(l) + lossPrice*f.scat*float64(s-1)
		if miss >= best {
			break
		}
		steps, late, best = s, l, miss
	}
	return steps, late
}

// The nearer the marks keep to their time, the less an edge may miss it to be believed.
const (
	leastSlip = 0.2  // pitches
	mostSlip  = 0.45 // beyond that an edge could belong to either of two teeth
	gapSlip   = 0.45 // of that more for each missing tooth of a gap
	lossPrice = 6    // times the scatter: by so much a lost tooth is less likely than one off its time
)

// fits reports whether an edge that late can be the mark so many steps ahead. Over a gap the speed changes unseen; but an
// early edge there may be a tooth where there should be none.
func (f *follower) fits(steps int, late float64) bool {
	return steps > 0 && late < f.slip(steps) && late > -f.slipEarly(steps)
}

func (f *follower) slip(steps int) float64 {
	t := min(max(0.1+4*f.scat, leastSlip), mostSlip)
	d := f.ahead(steps)
	if d < 1 { // an extra tooth has its neighbours half a pitch away
		return t * 0.5
	}
	return t * (1 + gapSlip*(d-1))
}

func (f *follower) slipEarly(steps int) float64 {
	t := min(max(0.1+4*f.scat, leastSlip), mostSlip)
	d := f.ahead(steps)
	if d < 1 {
		return t * 0.5
	}
	return t + 0.06*(d-1)
}

func (f *follower) accept(pos float64, steps int, late float64) {
	d := f.ahead(steps)
	f.sum += d
	f.last = (f.last + steps) % (len(f.at) - 1)
	f.pos = pos
	f.scat += (min(math.Abs(late), 0.3) - f.scat) / 16
	if f.n == pace {
		copy(f.ps[:], f.ps[1:])
		copy(f.th[:], f.th[1:])
		f.n--
	}
	f.ps[f.n], f.th[f.n] = pos, f.sum
	f.n++
}

// slowing reports whether the shaft is losing speed from tooth to tooth.
func (f *follower) slowing() bool {
	_, trend := f.speed()
	return trend > 0.005
}

// fit is how well a run of edges fits the wheel when its first edge is a certain tooth.
type fit struct {
	mark  int     // of the first edge
	cost  float64 // lost and extra edges, and distances from the expected times
	edges int     // taken as teeth
	turns float64 // passed
}

// try follows the edges from the first on, which is taken for the given mark, and gives up beyond a cost.
func (f *follower) try(at []float64, mark int, edges []pulse, pitch, scat, enough float64, most int) fit {
	f.begin(at, mark, edges[0].pos, pitch)
	f.scat = scat
	r := fit{mark: mark, edges: 1}
	for _, p := range edges[1:] {
		s, late := f.near(p.pos, most)
		if !f.fits(s, late) {
			r.cost++
		} else {
			r.cost += float64(s-1) + 2*late*late
			f.accept(p.pos, s, late)
			r.edges++
		}
		if r.cost > enough {
			break
		}
	}
	r.turns = f.sum / at[len(at)-1]
	return r
}

// align finds which tooth the first of the edges is. Not ok: no way of seeing them fits clearly better than the others.
func (f *follower) align(at []float64, edges []pulse, pitch float64, most int) (fit, bool) {
	n := len(at) - 1
	best, second := fit{cost: math.Inf(1)}, math.Inf(1)
	most = min(most, 4)
	allowed := 0.12*float64(len(edges)) + 1
	for m := range n {
		r := f.try(at, m, edges, pitch, unsureScat, min(allowed+2, best.cost+allowed), most)
		if r.cost < best.cost {
			best, second = r, best.cost
		} else {
			second = min(second, r.cost)
		}
	}
	clear := 0.9
	return best, best.cost <= allowed && second >= best.cost*1.3+clear && best.turns > 1+2/at[n]
}
