package turn

import (
	"fmt"

	"lapwing/internal/frame"
)

// Converter turns frames into turns. It is fed by one goroutine.
type Converter struct {
	cfg   Config
	grids []grid // per throw
	press []*stream
	vib   []*stream
	throw [][3]int // per throw: index into press of both ends (-1: none), first index into vib

	recs    []*record // consecutive revolutions, oldest first
	spare   []*record
	pending int // index into recs of the next revolution to emit
	begin   string
	base    int64 // sample number of the history's first sample
	next    int64 // sample number after its last
	m       angleMap
	k       kernel
	perDeg  []float64
	least   float64 // widest of all streams' least σ
	out     Turn
	throws  []Throw
}

// record is what is kept of a frame besides its samples.
type record struct {
	turn, seq0   int64
	mark0, mark1 float64
	inner        []float64
	q            frame.Quality
}

// ahead is how many revolutions after the one in hand must have come.
const ahead = 2

// Why a revolution gives no turn. The first four are said of the revolution itself.
const (
	whyGap      = "samples missing"
	whyMissing  = "phase: pulse missing"
	whyStarting = "starting: speed not established"
	whyUneven   = "phase: speed changed more than the machine can"
	whyInput    = "frame: inputs missing or of unequal length"
	whyBegin    = "start: no revolution before it"
	whyEnd      = "end: the revolutions after it did not come"
	whyCount    = "phase: revolutions not counted"
	whyShort    = "samples missing at the ends of the turn"
	neighbour   = " (in a neighbouring revolution)"
)

// New checks the configuration and gives a converter at rest.
func New(cfg Config) (*Converter, error) {
	cfg, err := cfg.fill()
	if err != nil {
		return nil, fmt.Errorf("turn: %w", err)
	}
	impact, err := cfg.band(cfg.ImpactBand)
	if err != nil {
		return nil, fmt.Errorf("turn: impact band: %w", err)
	}
	leak, err := cfg.band(cfg.LeakBand)
	if err != nil {
		return nil, fmt.Errorf("turn: leak band: %w", err)
	}
	c := &Converter{cfg: cfg, begin: whyBegin, m: angleMap{marks: cfg.Marks}}
	for _, t := range cfg.Throws {
		g := newGrid(&c.cfg, t.DeadCentreDeg)
		c.grids = append(c.grids, g)
		out := Throw{Grid: g.Grid, Pos: make([]float64, g.N), Omega: make([]float64, g.N)}
		at := [3]int{-1, -1, len(c.vib)}
		for e, ch := range t.Pressure {
			if ch.Input >= 0 {
				at[e] = len(c.press)
				c.press = append(c.press, &stream{ch: ch, least: ch.Passage.sigma(cfg.Rate)})
				c.least = max(c.least, ch.Passage.sigma(cfg.Rate))
				out.P[e] = make([]float64, g.N)
			}
		}
		for _, ch := range t.Accel {
			s := &stream{ch: ch, accel: true}
			v := Vib{Channel: ch.ID, Rate: cfg.Rate}
			if impact != nil {
				s.impact = newBand(impact)
				v.Peak, v.RMS = make([]float64, g.N), make([]float64, g.N)
				if leak != nil {
					s.leak = newBand(leak)
					v.Leak = make([]float64, g.N)
				}
			}
			c.vib = append(c.vib, s)
			out.Vib = append(out.Vib, v)
		}
		c.throw = append(c.throw, at)
		c.throws = append(c.throws, out)
	}
	c.perDeg = make([]float64, c.grids[0].N)
	return c, nil
}

// Add takes the next revolution and emits the turns that it completes: in steady running one, that of the second
// revolution before it. A Turn and everything in it is valid until the next one is emitted or until the next Add or
// Flush, whichever comes first; Clone what must live longer. Only f's contents are used, f may be reused.
func (c *Converter) Add(f *frame.Frame, emit func(*Turn)) {
	n := c.samples(f)
	switch {
	case len(c.recs) == 0:
	case f.Seq0 > c.next || f.Seq0 < c.base:
		c.cut(whyGap, emit)
	default:
		if l := c.recs[len(c.recs)-1]; f.Turn != l.turn+1 || f.Mark0 != l.mark1 {
			c.cut(whyCount, emit)
		}
	}
	if n < 0 || f.Q&frame.Gap != 0 { // nothing can be leant on this one from either side
		why := whyGap
		if n < 0 {
			why = whyInput
		}
		c.cut(why, emit)
		c.refuse(c.record(f), why, emit)
		c.forget()
		return
	}
	c.push(f, n)
	for c.pending+ahead < len(c.recs) {
		c.make(c.pending, emit)
		c.pending++
	}
}

// Flush emits what is left, which cannot be turns any more, and puts the converter at rest.
func (c *Converter) Flush(emit func(*Turn)) {
	c.cut(whyEnd, emit)
	c.begin = whyBegin
	c.forget()
}

// samples gives the number of samples per input of a frame, -1 when an input that is needed is missing or differs.
func (c *Converter) samples(f *frame.Frame) int {
	n := -1
	for _, list := range [2][]*stream{c.press, c.vib} {
		for _, s := range list {
			if s.ch.Input >= len(f.Counts) {
				return -1
			}
			if m := len(f.Counts[s.ch.Input]); n < 0 {
				n = m
			} else if m != n {
				return -1
			}
		}
	}
	return max(n, 0)
}

// push keeps a frame: its samples behind the history's end (neighbouring frames share a sample), its marks as a record.
func (c *Converter) push(f *frame.Frame, n int) {
	if len(c.recs) == 0 {
		c.restart(f.Seq0)
	}
	if c.pending > 1 { // the revolution before the pending one is the oldest that is still needed
		old := c.pending - 1
		c.spare = append(c.spare, c.recs[:old]...)
		c.recs = append(c.recs[:0], c.recs[old:]...)
		c.pending -= old
		c.drop(c.recs[0].seq0)
	}
	c.recs = append(c.recs, c.record(f))
	skip := int(c.next - f.Seq0)
	if skip >= n {
		return
	}
	for _, list := range [2][]*stream{c.press, c.vib} {
		for _, s := range list {
			s.add(f.Counts[s.ch.Input][skip:n], c.next)
		}
	}
	c.next = f.Seq0 + int64(n)
}

func (c *Converter) record(f *frame.Frame) *record {
	var r *record
	if n := len(c.spare); n > 0 {
		r, c.spare = c.spare[n-1], c.spare[:n-1]
	} else {
		r = new(record)
	}
	*r = record{turn: f.Turn, seq0: f.Seq0, mark0: f.Mark0, mark1: f.Mark1, inner: append(r.inner[:0], f.Inner...), q: f.Q}
	return r
}

// drop forgets samples before seq.
func (c *Converter) drop(seq int64) {
	n := int(seq - c.base)
	if n <= 0 {
		return
	}
	for _, list := range [2][]*stream{c.press, c.vib} {
		for _, s := range list {
			s.drop(n, seq)
		}
	}
	c.base = seq
}

// cut emits all pending revolutions without a turn and ends the run of consecutive ones.
func (c *Converter) cut(why string, emit func(*Turn)) {
	if why != whyEnd {
		why += neighbour
	}
	for ; c.pending < len(c.recs); c.pending++ {
		own := c.amiss(c.pending)
		if own == "" {
			own = why
		}
		c.refuse(c.recs[c.pending], own, emit)
	}
	c.begin = why
	if n := len(c.recs); n > 0 {
		if last := c.recs[n-1].why(); last != "" {
			c.begin = last + neighbour
		}
	}
	c.forget()
}

// amiss says what is wrong with recs[i] or, failing that, with those of its neighbours that are there.
func (c *Converter) amiss(i int) string {
	if why := c.recs[i].why(); why != "" {
		return why
	}
	if i == 0 {
		return c.begin
	}
	for _, r := range c.recs[i-1 : min(i+ahead+1, len(c.recs))] {
		if why := r.why(); why != "" {
			return why + neighbour
		}
	}
	return ""
}

func (c *Converter) forget() {
	c.spare = append(c.spare, c.recs...)
	c.recs = c.recs[:0]
	c.pending = 0
}

// restart empties the history and begins it at sample seq. The filters begin settled on their first sample; the first
// turn that can be made begins 300° later or more, far beyond their memory.
func (c *Converter) restart(seq int64) {
	for _, list := range [2][]*stream{c.press, c.vib} {
		for _, s := range list {
			s.restart()
		}
	}
	c.base, c.next = seq, seq
}

// why says what is wrong with a revolution itself.
func (r *record) why() string {
	switch {
	case r.q&frame.Gap != 0:
		return whyGap
	case r.q&frame.Missing != 0:
		return whyMissing
	case r.q&frame.Starting != 0:
		return whyStarting
	case r.q&frame.Uneven != 0:
		return whyUneven
	}
	return ""
}
