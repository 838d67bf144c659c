package frame

import "math"

// markApart is a wheel of equal teeth beside a mark of its own on another channel. The mark cuts the turns as one mark a turn
// does, with all its care; each cut is then moved to the tooth that follows, and the teeth between are its inner marks.
// Which tooth follows the mark is learnt as a distance in pitches, so that neither jitter nor a lost tooth shifts it.
type markApart struct {
	*oneMark
	teeth *toothDetector
	n     int
	own   Config // of the mark

	edges   []float64 // teeth seen, oldest first
	wait    cuts      // turns of the mark whose teeth are still to come
	out     cuts
	near    float64 // pitches from the mark to mark 0
	seen    int     // marks that near was learnt from
	astray  int     // marks in a row whose tooth was not there
	end     float64 // mark 1 of the newest turn given
	endMark float64 // the mark that it belongs to
	inner   []float64
	lost    int64
	ring    *ring
}

const (
	// A mark that comes with a tooth's edge, give or take a tenth of a pitch, belongs to that tooth.
	markEarly  = 0.1
	toothReach = 0.4 // of a pitch, within which a tooth is looked for
	toothWait  = 3.0 // pitches after the closing mark that its tooth is waited for
	mostAstray = 8
)

func newApart(cfg *Config, r *ring, holes *spans) *markApart {
	a := &markApart{teeth: newToothDetector(cfg, r, holes), n: cfg.Wheel.Teeth, near: math.NaN(), end: math.NaN(), endMark: math.NaN(), ring: r}
	a.own = *cfg
	a.own.Channel, a.own.Wheel, a.own.Auto, a.own.Hysteresis = cfg.Index, Wheel{}, true, 0
	a.oneMark = newOneMark(&a.own, r, holes)
	a.edges = make([]float64, 0, 8*a.n+64)
	a.inner = make([]float64, 0, a.n)
	return a
}

func (a *markApart) sample(j int64) bool {
	if p, ok := a.teeth.step(j, a.gate.locked); ok {
		a.edge(p.pos)
	}
	if a.oneMark.sample(j) {
		for {
			c, ok := a.oneMark.next()
			if !ok {
				break
			}
			a.wait.add(c)
		}
	}
	for a.wait.n > 0 {
		c := &a.wait.c[a.wait.first]
		late := c.b.pos + toothWait*a.pitch(c)
		if !(float64(j) > late || len(a.edges) > 0 && a.edges[len(a.edges)-1] > c.b.pos+(1+toothReach)*a.pitch(c)) {
			break
		}
		a.resolve(j)
	}
	return a.out.n > 0
}

func (a *markApart) pitch(c *cut) float64 { return (c.b.pos - c.a.pos) / float64(c.k*a.n) }

func (a *markApart) next() (cut, bool) { return a.out.take() }

func (a *markApart) edge(pos float64) {
	if len(a.edges) == cap(a.edges) {
		m := copy(a.edges, a.edges[len(a.edges)/4:])
		a.edges = a.edges[:m]
	}
	a.edges = append(a.edges, pos)
}

// resolve gives the oldest waiting turn with its teeth; limit is the sample up to which it may reach.
func (a *markApart) resolve(limit int64) {
	c, _ := a.wait.take()
	p := a.pitch(&c)
	var lostA, lostB bool
	from := a.end
	if c.a.pos != a.endMark {
		from, lostA = a.tooth(c.a.pos, p)
	}
	to, lostB := a.tooth(c.b.pos, p)
	a.end, a.endMark = to, c.b.pos
	if int64(math.Ceil(to)) > limit || !(to > from) {
		a.end, a.endMark = math.NaN(), math.NaN()
		return
	}
	c.a.pos, c.b.pos = from, to
	if lostA || lostB {
		c.q |= LostTooth
	}
	if c.inner = nil; c.k == 1 {
		c.q |= a.follow(from, to, (to-from)/float64(a.n))
		c.inner = a.inner
	}
	a.out.add(c)
	old := 0
	for old < len(a.edges) && a.edges[old] < to-p {
		old++
	}
	m := copy(a.edges, a.edges[old:])
	a.edges = a.edges[:m]
}

// tooth finds mark 0 beside a mark of the shaft.
func (a *markApart) tooth(mark, pitch float64) (pos float64, lost bool) {
	if a.seen == 0 {
		for _, e := range a.edges {
			if e > mark-markEarly*pitch {
				if e < mark+(1-markEarly+toothReach)*pitch {
					a.near, a.seen = (e-mark)/pitch, 1
					return e, false
				}
				break
			}
		}
		return mark + pitch/2, true
	}
	at := mark + a.near*pitch
	best := math.Inf(1)
	for _, e := range a.edges {
		if math.Abs(e-at) < math.Abs(best-at) {
			best = e
		}
	}
	if off := (best - at) / pitch; math.Abs(off) < toothReach {
		a.astray = 0
		a.seen = min(a.seen+1, 64)
		a.near += off / float64(a.seen)
		return best, false
	}
	if a.astray++; a.astray >= mostAstray {
		a.seen, a.astray = 0, 0 // the mark or the wheel has been moved
	}
	return at, true
}

// follow finds the teeth between two marks 0, each from the one before it.
func (a *markApart) follow(from, to, pitch float64) (q Quality) {
	a.inner = a.inner[:0]
	i := 0
	at, p := from, pitch
	for i < len(a.edges) && a.edges[i] <= from {
		i++
	}
	lost := 0
	for range a.n - 1 {
		want := at + p
		best := -1
		for k := i; k < len(a.edges) && a.edges[k] < min(want+toothReach*p, to); k++ {
			if math.Abs(a.edges[k]-want) < toothReach*p && (best < 0 || math.Abs(a.edges[k]-want) < math.Abs(a.edges[best]-want)) {
				best = k
			}
		}
		if best < 0 {
			a.inner = append(a.inner, math.NaN())
			q |= LostTooth
			lost++
			at = want
			continue
		}
		for k := i; k < best; k++ {
			q |= stray(a.edges[k]-at, p)
		}
		p += .3 * (a.edges[best] - at - p)
		at, i = a.edges[best], best+1
		a.inner = append(a.inner, at)
	}
	for k := i; k < len(a.edges) && a.edges[k] < to-toothRings*p; k++ {
		q |= stray(a.edges[k]-at, p)
	}
	a.lost += int64(lost)
	if math.Abs(to-at-p) > toothReach*p || lost > a.n/3 { // counted wrongly, or hardly at all
		for k := range a.inner {
			a.inner[k] = math.NaN()
		}
		q |= LostTooth
	}
	return q
}

// stray is what an edge between two teeth means.
func stray(after, pitch float64) Quality {
	if after < toothRings*pitch {
		return Bounced
	}
	return Extra
}

func (a *markApart) finish() {
	a.oneMark.finish()
	for {
		c, ok := a.oneMark.next()
		if !ok {
			break
		}
		a.wait.add(c)
	}
	for a.wait.n > 0 {
		a.resolve(a.ring.end())
	}
}

func (a *markApart) restart() {
	a.oneMark.restart()
	a.teeth.restart()
	a.edges, a.wait.n = a.edges[:0], 0
	a.end, a.endMark = math.NaN(), math.NaN()
}

func (a *markApart) needs(j int64) int64 {
	n := min(a.oneMark.needs(j), a.teeth.needs(j))
	oldest := math.Inf(1)
	if a.wait.n > 0 {
		oldest = a.wait.c[a.wait.first].a.pos
	} else if a.gate.open {
		oldest = a.gate.m.pos
	}
	if !math.IsInf(oldest, 1) { // mark 0 may lie half a pitch before the mark
		n = min(n, int64(math.Floor(oldest-(markEarly+toothReach)*a.gate.maxT/float64(a.n)))-1)
	}
	return n
}

func (a *markApart) state() refState {
	s := a.oneMark.state()
	s.missing += a.lost
	return s
}
