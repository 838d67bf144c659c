package frame

import "math"

// Fractions of a pitch.
const (
	toothOnTime = 0.05 // an edge nearer than this to its time needs no comparison with others
	apart       = 0.6  // edges further apart than this are not in one tooth's time
	toothRings  = 0.25 // an edge within this after a tooth is the tooth's own
)

const (
	mostMisfits  = 12 // edges in a row that are no teeth: the place on the wheel is lost
	overduePitch = 6  // pitches without a tooth: likewise
	mostSlipped  = 3  // teeth that the place on the wheel may have slipped by
	mostUnseen   = 20 // turns after which the speed must be established again
)

// cog follows a toothed wheel: which edge is which tooth, and where turns begin.
type cog struct {
	det        *toothDetector
	ring       *ring
	at         []float64 // places of the marks, pitches
	n          int       // marks a turn
	minT, maxT float64   // samples: shortest and longest turn
	keep       float64   // samples: longest frame

	locked bool
	lost   bool
	f      follower
	hist   periods
	coast  coast
	expect float64 // samples: the next turn; 0: not known

	open     bool
	mark0    float64
	bias     []float64 // pitches by which each mark comes late of itself: teeth cut unevenly, an uneven speed
	swings   swings
	marks    []float64 // the open turn's further marks; NaN: lost
	q        Quality
	nLost    int     // teeth lost in the open turn
	nStray   int     // edges in it that are no teeth
	nFilled  int     // of those, where a tooth would be if this were not the gap
	widest   float64 // pitches: the longest stretch of it without a tooth that should have one
	starting bool    // speed not established

	cand      pulse
	candSteps int
	candLate  float64
	candDue   float64
	hasCand   bool
	misfits   int
	relock    bool // the place on the wheel has proved wrong
	replaying bool // the edges that are held are gone through again

	past      []pulse // edges, newest last
	try       follower
	sought    float64 // the newest edge when the place was last looked for
	sane      int     // edges in a row at about equal distances
	lastSane  float64
	lastPulse float64
	floor     int64   // older samples may have gone; what the ring still holds depends on how the stream was cut
	lastEnd   float64 // closing mark of the newest turn given
	due       float64
	ready     cuts

	nExtra, nMissing int64
}

func newCog(cfg *Config, r *ring, holes *spans) *cog {
	at := cfg.Wheel.pitches()
	n := len(at) - 1
	c := &cog{det: newToothDetector(cfg, r, holes), ring: r, at: at, n: n, minT: cfg.Rate * 60 / cfg.MaxRPM, maxT: cfg.Rate * 60 / cfg.MinRPM,
		keep: cfg.KeepSeconds * cfg.Rate, hist: periods{rate: cfg.Rate}, marks: make([]float64, 0, n), past: make([]pulse, 0, 2*n+24),
		bias: make([]float64, n), swings: swings{last: make([]float64, n)}}
	c.restart()
	c.lastEnd = math.Inf(-1)
	return c
}

func (c *cog) restart() {
	c.unlock()
	c.lost = false
	c.det.restart()
	c.past = c.past[:0]
	c.floor = c.ring.first
	c.sane = 0
	c.lastSane, c.lastPulse, c.sought = math.Inf(-1), math.Inf(-1), math.Inf(-1)
}

// unlock forgets the place on the wheel; the edges are kept, so that it can be found again from them.
func (c *cog) unlock() {
	c.locked, c.open, c.hasCand, c.relock = false, false, false, false
	c.misfits = 0
	c.coast.reset()
	c.due = c.lastPulse + 1.1*c.maxT
	c.det.survey.restart()
}

func (c *cog) stop() { c.unlock() }

func (c *cog) sample(j int64) bool {
	if p, ok := c.det.step(j, c.locked); ok {
		c.floor = max(c.floor, c.needs(j))
		c.edge(p)
	}
	if float64(j) >= c.due {
		c.floor = max(c.floor, c.needs(j))
		c.tick(float64(j))
	}
	return c.ready.n > 0
}

func (c *cog) next() (cut, bool) { return c.ready.take() }

// finish decides what is pending at the end of a stretch of samples.
func (c *cog) finish() {
	if c.hasCand {
		c.commit()
	}
}

func (c *cog) edge(p pulse) {
	if p.pos <= c.lastPulse {
		return
	}
	c.remember(p)
	if c.locked {
		c.running(p)
	} else {
		c.searching()
	}
}

func (c *cog) remember(p pulse) {
	d := p.pos - c.lastPulse
	if n := len(c.past); n > 0 {
		before := d
		if n > 1 {
			before = c.past[n-1].pos - c.past[n-2].pos
		}
		shortest := 0.3 * c.minT / c.at[c.n]
		if c.sane++; d < shortest || d > 5*before || before > 5*d {
			c.sane = 0
		}
		if c.sane >= 10 {
			c.lastSane = p.pos
		}
	}
	if len(c.past) == cap(c.past) {
		m := copy(c.past, c.past[len(c.past)/8+1:])
		c.past = c.past[:m]
	}
	c.past = append(c.past, p)
	old := 0
	for c.past[old].pos < p.pos-0.9*c.keep {
		old++
	}
	if old > 0 {
		m := copy(c.past, c.past[old:])
		c.past = c.past[:m]
	}
	c.lastPulse = p.pos
	if !c.locked {
		c.due = p.pos + 1.1*c.maxT
	}
}

// running judges an edge while the place on the wheel is known.
func (c *cog) running(p pulse) {
	s, late := c.f.near(p.pos, c.most())
	fits := c.f.fits(s, late)
	if c.hasCand {
		if pitch, _ := c.f.speed(); s == c.candSteps && fits && p.pos-c.cand.pos < apart*pitch*min(1, c.f.ahead(s)) {
			c.compare(p, late)
			return
		}
		before := c.sought
		c.commit()
		if !c.locked || c.sought != before { // found again from the edges held, this one among them
			return
		}
		s, late = c.f.near(p.pos, c.most())
		fits = c.f.fits(s, late)
	}
	switch {
	case s == 0 && late < toothRings:
		c.q |= Bounced
	case !fits:
		c.stray(s, late)
	default:
		c.cand, c.candSteps, c.candLate, c.hasCand = p, s, late, true
		if math.Abs(late) < toothOnTime && !c.isWeak(p, s) {
			c.commit()
			return
		}
		pitch, trend := c.f.speed()
		c.candDue = c.f.pos + c.f.due(c.f.ahead(s)+c.f.slip(s), pitch, trend) + 2
		c.setDue()
	}
}

// compare keeps the better of the waiting edge and another one in the same tooth's time.
func (c *cog) compare(p pulse, late float64) {
	score := func(p pulse, late float64) float64 {
		if c.isWeak(p, c.candSteps) {
			return 1 + math.Abs(late)
		}
		return math.Abs(late)
	}
	if pitch, _ := c.f.speed(); p.pos-c.cand.pos < toothRings*pitch {
		c.q |= Bounced
	} else {
		c.q |= Extra
		c.nStray++
		c.nExtra++
	}
	if score(p, late) < score(c.cand, c.candLate) {
		c.cand, c.candLate = p, late
	}
}

// stray counts an edge that is no tooth; after too many in a row the place on the wheel is not believed any more.
func (c *cog) stray(steps int, late float64) {
	if d, gap := c.f.ahead(steps)+late, c.f.ahead(1); gap < 1 || gap > 1.5 && math.Abs(d-math.Round(d)) < 0.3 && d > 0.5 && d < gap-0.5 {
		c.nFilled++
	}
	c.q |= Extra
	c.nStray++
	c.nExtra++
	if c.misfits++; c.misfits >= mostMisfits {
		c.unlock()
	}
}

// isWeak: less than half of the usual swing, and of what this tooth made a turn ago. A tooth that is lower than the others
// every turn is made so.
func (c *cog) isWeak(p pulse, steps int) bool {
	usual := c.det.usual
	if own := c.swings.last[(c.f.last+steps)%c.n]; own > 0 {
		usual = min(usual, own)
	}
	return p.height < usual/2
}

func (c *cog) setDue() {
	if c.hasCand {
		c.due = c.candDue
		return
	}
	pitch, trend := c.f.speed()
	c.due = c.f.pos + 1.3*c.f.due(c.f.ahead(1)+overduePitch, pitch, trend)
	if c.open {
		c.due = min(c.due, c.mark0+c.keep)
	}
}

// tick is called at every sample at or after due.
func (c *cog) tick(j float64) {
	switch {
	case !c.locked: // it stands
		c.past, c.expect, c.sane = c.past[:0], 0, 0
		c.due = math.Inf(1)
	case c.hasCand && j >= c.candDue:
		c.commit()
	default:
		lost := c.abrupt()
		c.unlock()
		c.lost = lost
	}
}

// abrupt reports whether teeth stopped coming while the machine ran at speed. A shaft slows down before it stands;
// a cable does not.
func (c *cog) abrupt() bool {
	return c.expect > 0 && c.expect < c.maxT/3 && !c.hist.slowing() && !c.f.slowing()
}

// period gives the samples of a turn at the present speed.
func (c *cog) period() float64 {
	pitch, _ := c.f.speed()
	return pitch * c.at[c.n]
}

func (c *cog) needs(j int64) int64 {
	n := c.det.needs(j)
	oldest := math.Inf(1)
	switch {
	case c.open:
		oldest = c.mark0
	case c.expect > 0:
		oldest = c.lastEnd
	case len(c.past) > 0:
		oldest = max(c.past[0].pos, c.lastEnd)
	}
	return min(n, int64(math.Floor(max(min(oldest, float64(n)), float64(j)-c.keep))))
}

func (c *cog) state() refState {
	s := refState{counts: true, locked: c.locked, lost: c.lost, open: !c.locked && c.sane >= 10, expect: c.expect, lastPulse: c.lastSane, coasting: c.coast.coasting(),
		extra: c.nExtra, missing: c.nMissing, unclear: c.det.lostEdge, minT: c.minT, maxT: c.maxT, keep: c.keep,
		height: math.NaN(), noise: math.NaN(), seen: c.det.have || c.det.survey.full()}
	if c.locked {
		s.expect = c.period()
	}
	if c.det.have {
		s.height, s.noise = c.det.usual, c.swings.noise()
	}
	return s
}
