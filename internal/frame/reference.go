package frame

import "math"

// reference finds the turns on the shaft reference: one mark a turn or a toothed wheel. It is shown every sample once.
type reference interface {
	sample(j int64) bool // takes sample j; true: next has something
	next() (cut, bool)   // gives the turns that have been found, in order
	finish()             // decides what is pending at the end of a stretch of samples
	stop()               // forgets the speed and the open turn
	restart()            // begins anew after samples were lost for long
	needs(j int64) int64 // the oldest sample that must stay
	state() refState
}

// refState is what a reference tells of itself.
type refState struct {
	locked, lost, open, coasting bool
	counts                       bool    // turns that go by unseen are counted by the reference itself
	expect                       float64 // samples a turn
	lastPulse                    float64
	minT, maxT, keep             float64
	extra, missing, unclear      int64
	height, noise                float64
	seen                         bool // standstill can be told from not knowing
}

// cuts is a short queue of turns; their inner marks are copied in.
type cuts struct {
	c     [8]cut
	inner [8][]float64
	n     int
	first int
}

func (q *cuts) add(c cut) {
	if q.n == len(q.c) { // cannot be: the edges that are held make fewer turns
		return
	}
	i := (q.first + q.n) % len(q.c)
	q.inner[i] = append(q.inner[i][:0], c.inner...)
	c.inner = q.inner[i]
	q.c[i] = c
	q.n++
}

func (q *cuts) take() (cut, bool) {
	if q.n == 0 {
		return cut{}, false
	}
	c := q.c[q.first]
	q.first = (q.first + 1) % len(q.c)
	q.n--
	return c, true
}

// oneMark is a shaft with one mark a turn.
type oneMark struct {
	cfg   *Config
	det   *detector
	gate  *gate
	ready cuts
}

func newOneMark(cfg *Config, r *ring, holes *spans) *oneMark {
	d := newDetector(cfg, r, holes)
	return &oneMark{cfg: cfg, det: d, gate: newGate(cfg, d)}
}

func (o *oneMark) sample(j int64) bool {
	if p, ok := o.det.step(j, o.gate.locked); ok {
		if c, ok := o.gate.pulse(p); ok {
			o.ready.add(c)
		}
	}
	if float64(j) >= o.gate.due {
		if c, ok := o.gate.tick(float64(j)); ok {
			o.ready.add(c)
		}
	}
	return o.ready.n > 0
}

func (o *oneMark) next() (cut, bool) { return o.ready.take() }

func (o *oneMark) finish() {
	if p, ok := o.det.finish(); ok {
		if c, ok := o.gate.pulse(p); ok {
			o.ready.add(c)
		}
	}
	if o.gate.hasCand {
		if c, ok := o.gate.accept(); ok {
			o.ready.add(c)
		}
	}
}

func (o *oneMark) stop() { o.gate.unlock() }

func (o *oneMark) restart() {
	o.gate.lost = false
	o.gate.lastPulse = math.Inf(-1)
	o.det.restart()
}

func (o *oneMark) needs(j int64) int64 {
	n := o.det.needs(j)
	if o.gate.open {
		n = min(n, int64(math.Floor(o.gate.m.pos)))
	}
	return n
}

func (o *oneMark) state() refState {
	g := o.gate
	s := refState{locked: g.locked, lost: g.lost, open: g.open, expect: g.expect, lastPulse: g.lastPulse, coasting: g.coast.coasting(),
		minT: g.minT, maxT: g.maxT, keep: g.keep, extra: g.nExtra, missing: g.nMissing, unclear: o.det.edgesLost,
		height: math.NaN(), noise: math.NaN(), seen: !o.cfg.Auto || o.det.have || o.det.survey.full()}
	if o.det.have && (o.cfg.Auto || o.det.nh > 0) {
		s.height, s.noise = o.det.height(), o.det.lev.noise
	}
	return s
}
