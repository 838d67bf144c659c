package frame

import "math"

// mostSpan is how many periods a frame may span before the shaft reference is given up: three marks lost in a row are
// bridged with some room.
const mostSpan = 6

// Fractions of a period: a mark nearer than onTime to where it is expected needs no comparison with others; a pulse
// within ringing after a mark is the mark's own.
const (
	onTime  = 0.004
	ringing = 0.1
)

// Locking on: so many equal periods in a row make a speed. In disturbed signals only every second or third pulse may
// be the mark.
const (
	lockPeriods = 4
	lockStrides = 3
	pulsesKept  = lockPeriods*lockStrides + 1
)

// cut is a revolution that has been found: it lies between two marks.
type cut struct {
	a, b pulse
	k    int // revolutions it spans
	q    Quality

	skip  int64     // revolutions before it that are in no frame
	inner []float64 // further marks of a toothed wheel
}

// gate decides by time and height which pulses are marks of the shaft.
type gate struct {
	det        *detector
	minT, maxT float64 // samples: shortest and longest turn
	keep       float64 // samples: longest frame

	open   bool // m is the mark that opens the present turn
	m      pulse
	weak   bool // m was weak
	locked bool // the speed is known
	lost   bool // marks stopped coming at full speed
	hist   periods
	coast  coast
	ebbing bool    // it was running down when marks began to seem missing: they may only have come late
	expect float64 // samples: the next period, when locked

	cand      pulse // in its time, but not the best it could be: wait for a better one
	candK     int
	candDue   float64 // sample position
	hasCand   bool
	lowered   bool
	due       float64 // sample position of the next thing to do without a pulse
	recent    [pulsesKept]pulse
	nr        int       // pulses in recent: of this run of pulses, newest last
	sinceMark int       // pulses since m that were no marks
	extras    []float64 // positions of pulses that were no marks, not yet told
	lastPulse float64

	nExtra, nMissing int64
}

const maxExtras = 64

func newGate(cfg *Config, det *detector) *gate {
	return &gate{det: det, minT: cfg.Rate * 60 / cfg.MaxRPM, maxT: cfg.Rate * 60 / cfg.MinRPM,
		keep: cfg.KeepSeconds * cfg.Rate, hist: periods{rate: cfg.Rate}, due: math.Inf(1),
		extras: make([]float64, 0, maxExtras), lastPulse: math.Inf(-1)}
}

// pulse takes the next pulse and gives the turn that it closes, if any.
func (g *gate) pulse(p pulse) (cut, bool) {
	if p.pos <= g.lastPulse { // two excursions with one edge: ringing around the level
		return cut{}, false
	}
	g.lastPulse = p.pos
	g.remember(p)
	if g.locked {
		return g.running(p)
	}
	return g.searching(p)
}

func (g *gate) remember(p pulse) {
	if g.nr == len(g.recent) {
		copy(g.recent[:], g.recent[1:])
		g.nr--
	}
	g.recent[g.nr] = p
	g.nr++
}

// running judges a pulse while the speed is known.
func (g *gate) running(p pulse) (cut, bool) {
	r := (p.pos - g.m.pos) / g.expect
	k := int(math.Round(min(r, mostSpan+1)))
	if k < 1 || k > mostSpan || math.Abs(r-float64(k)) > g.hist.tolerance(g.expect, k) {
		return g.misfit(p, r)
	}
	if g.hasCand && p.pos-g.cand.pos < ringing*g.expect && !g.muchBetter(p, k) {
		g.cand.bounced = true
		return cut{}, false
	}
	if g.hasCand {
		if g.score(p, k) < g.score(g.cand, g.candK) {
			p, g.cand, g.candK = g.cand, p, k
		}
		g.extra(p)
		return cut{}, false
	}
	g.cand, g.candK, g.hasCand = p, k, true
	if math.Abs(r-float64(k)) < onTime && p.height >= g.det.height()/2 {
		return g.accept()
	}
	g.candDue = g.m.pos + g.expect*(float64(k)+g.hist.tolerance(g.expect, k)) + float64(g.det.rise+g.det.settle) + 2
	g.setDue()
	return cut{}, false
}

// score says how badly a pulse fits; a weak one fits worse than any in time.
func (g *gate) score(p pulse, k int) float64 {
	s := math.Abs((p.pos-g.m.pos)/g.expect-float64(k)) / g.hist.tolerance(g.expect, k)
	if p.height < g.det.height()/2 {
		s++
	}
	return s
}

// muchBetter reports whether a pulse close behind the candidate is the mark and the candidate a disturbance before it,
// and not the mark's ringing.
func (g *gate) muchBetter(p pulse, k int) bool {
	off := func(p pulse, k int) float64 { return math.Abs((p.pos-g.m.pos)/g.expect - float64(k)) }
	is, was := off(p, k), off(g.cand, g.candK)
	return was > onTime && is < was/4 && p.height >= g.det.height()/2
}

// misfit deals with a pulse that is no mark. When the mark is overdue and the last three pulses make equal periods by
// themselves, the speed has stepped: begin anew on them.
func (g *gate) misfit(p pulse, r float64) (cut, bool) {
	if r < ringing {
		g.m.bounced = true
		return cut{}, false
	}
	g.sinceMark++
	if n := g.nr; !g.hasCand && r > 1+g.hist.tolerance(g.expect, 1) && g.sinceMark >= 3 {
		a, b := g.recent[n-2].pos-g.recent[n-3].pos, p.pos-g.recent[n-2].pos
		low := min(g.recent[n-3].height, g.recent[n-2].height, p.height)
		if g.turnLong(a) && g.turnLong(b) && g.hist.steady(a, b) && low >= g.det.height()/2 {
			g.unlock()
			copy(g.recent[:], g.recent[n-3:n])
			g.nr = 3
			g.begin(p)
			return cut{}, false
		}
	}
	g.extra(p)
	return cut{}, false
}

func (g *gate) turnLong(d float64) bool { return d >= 0.95*g.minT && d <= 1.05*g.maxT }

func (g *gate) extra(p pulse) {
	g.nExtra++
	if len(g.extras) == maxExtras {
		copy(g.extras, g.extras[1:])
		g.extras = g.extras[:maxExtras-1]
	}
	g.extras = append(g.extras, p.pos)
}

// accept closes the turn with the candidate.
func (g *gate) accept() (cut, bool) {
	p, k := g.cand, g.candK
	g.hasCand = false
	c := g.close(p, k)
	period := (c.b.pos - c.a.pos) / float64(k)
	if k == 1 {
		g.ebbing = false
	} else if g.coast.ebbing() || g.hist.slowing() {
		g.ebbing = true
	}
	if k > 1 {
		c.q |= Missing
		g.nMissing += int64(k - 1)
	} else if g.hist.uneven(period, g.expect) {
		c.q |= Uneven
	}
	g.hist.push(period)
	g.coast.push(period)
	if !g.turnLong(period) {
		g.unlock()
		g.begin(p)
		return c, true
	}
	g.expect = g.hist.expected()
	g.det.speed(g.expect)
	g.begin(p)
	return c, true
}

// close makes the turn that ends with p, with what the pulses tell of it.
func (g *gate) close(p pulse, k int) cut {
	c := cut{a: g.m, b: p, k: k}
	weak := p.height < g.det.height()/2
	if weak || g.weak {
		c.q |= Weak
	}
	if p.bounced || g.m.bounced {
		c.q |= Bounced
	}
	n := 0
	for _, x := range g.extras {
		if x < p.pos {
			c.q |= Extra
		} else {
			g.extras[n] = x
			n++
		}
	}
	g.extras = g.extras[:n]
	g.weak = weak
	g.det.took(p)
	return c
}

// begin opens a turn at p.
func (g *gate) begin(p pulse) {
	g.m, g.open, g.lost, g.lowered, g.sinceMark = p, true, false, false, 0
	g.setDue()
}

// searching judges a pulse while the speed is not known: every pulse that could be a mark closes a turn marked
// Starting, until enough periods in a row are alike.
func (g *gate) searching(p pulse) (cut, bool) {
	if !g.open || p.pos-g.m.pos > min(1.05*g.maxT, g.keep) {
		g.recent[0], g.nr = p, 1
		g.extras = g.extras[:0]
		g.weak = false
		g.begin(p)
		return cut{}, false
	}
	if p.pos-g.m.pos < 0.95*g.minT {
		g.nr--
		g.extra(p)
		return cut{}, false
	}
	c := g.close(p, 1)
	c.q |= Starting
	g.det.speed(p.pos - g.m.pos)
	g.begin(p)
	g.lock()
	return c, true
}

// lock looks whether the newest pulses, or every second or third of them, have equal periods. Where some must be left
// out, those that stay must stand well above them: else nobody can say which is the mark, and there is no lock.
func (g *gate) lock() {
	for stride := 1; stride <= lockStrides; stride++ {
		first := g.nr - 1 - lockPeriods*stride
		if first < 0 {
			return
		}
		if !g.chain(first, stride) {
			continue
		}
		g.hist.n = 0
		g.det.nh = 0
		for i := first; i < g.nr; i += stride {
			if i > first {
				g.hist.push(g.recent[i].pos - g.recent[i-stride].pos)
			}
			g.det.took(g.recent[i])
		}
		g.locked = true
		g.expect = g.hist.expected()
		g.det.speed(g.expect)
		g.setDue()
		return
	}
}

func (g *gate) chain(first, stride int) bool {
	low, high, others := math.Inf(1), 0.0, 0.0
	prev := 0.0
	for i := first; i < g.nr; i++ {
		p := g.recent[i]
		if (i-first)%stride != 0 {
			others = max(others, p.height)
			continue
		}
		low, high = min(low, p.height), max(high, p.height)
		if i == first {
			continue
		}
		d := p.pos - g.recent[i-stride].pos
		if !g.turnLong(d) || prev > 0 && !g.hist.steady(prev, d) {
			return false
		}
		prev = d
	}
	return low >= high/2 && low > 1.3*others
}

// unlock forgets the speed and the open turn.
func (g *gate) unlock() {
	g.locked, g.open, g.hasCand, g.lowered, g.weak = false, false, false, false, false
	g.nr, g.sinceMark = 0, 0
	g.coast.reset()
	g.ebbing = false
	g.extras = g.extras[:0]
	g.due = math.Inf(1)
	g.det.unlock()
}

// setDue works out when something is to be done although no pulse comes.
func (g *gate) setDue() {
	switch {
	case !g.open:
		g.due = math.Inf(1)
	case !g.locked:
		g.due = g.m.pos + min(1.05*g.maxT, g.keep) + float64(g.det.rise+g.det.settle)
	case g.hasCand:
		g.due = g.candDue
	case !g.lowered:
		g.due = g.m.pos + 1.35*g.expect
	default:
		g.due = g.m.pos + (mostSpan+0.5)*g.expect
	}
	if g.open {
		g.due = min(g.due, g.m.pos+g.keep)
	}
}

// tick is called at every sample at or after due.
func (g *gate) tick(j float64) (cut, bool) {
	switch {
	case g.hasCand && j >= min(g.candDue, g.m.pos+g.keep):
		return g.accept()
	case g.locked && !g.lowered && j < g.m.pos+g.keep:
		g.lowered = true
		g.det.lower()
		g.setDue()
	default:
		lost := g.locked && g.abrupt()
		g.unlock()
		g.lost = lost
	}
	return cut{}, false
}

// abrupt reports whether marks stopped coming while the machine ran at speed. A shaft slows down before it stands;
// a cable does not.
func (g *gate) abrupt() bool {
	if g.expect > g.maxT/3 || g.hist.slowing() || g.ebbing {
		return false
	}
	return g.sinceMark == 0 || g.recent[g.nr-1].pos-g.m.pos < 1.05*g.expect
}
