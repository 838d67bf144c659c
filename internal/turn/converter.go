package turn

import (
	"fmt"
	"slices"

	"lapwing/internal/dsp"
	"lapwing/internal/frame"
)

// Converter turns frames into turns. It is fed by one goroutine.
type Converter struct {
	cfg   Config
	grids []grid // per throw
	press []*stream
	vib   []*stream
	all   []*stream // both
	banks []*bank
	throw [][3]int // per throw: index into press of both ends (-1: none), first index into vib

	recs    []*record // consecutive revolutions, oldest first
	spare   []*record
	lone    *record // the newest frame, when it was refused at once
	pending int     // index into recs of the next revolution to emit
	begin   string
	base    int64 // sample number of the history's first sample
	next    int64 // sample number after its last
	m       angleMap
	hands   []hand  // per throw
	least   float64 // widest of all streams' least σ
	late    int64   // largest lag of all bands, samples
	out     Turn
	throws  []Throw

	// What Do calls, made once, and what it works on.
	addOne, makeOne func(i int)
	frame           *frame.Frame
	skip, upTo      int // samples of the frame
	span            []*record
	u               float64
}

// hand is what works on one throw, and what it found.
type hand struct {
	plain    ladder    // of the ends without a known passage
	undone   [2]ladder // by end, of those with one
	bins     dsp.Bins
	perDeg   []float64 // samples per degree at the grid angles
	why      string
	seq0, to int64 // samples used
}

// ahead is how many revolutions after the one in hand must have come.
const ahead = 2

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
	c := &Converter{cfg: cfg, begin: whyBegin, m: angleMap{marks: cfg.Marks, ripple: slices.Clone(cfg.Marks.Ripple)}}
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
				c.late = max(c.late, s.impact.late)
				v.Late = s.impact.rest
				v.Peak, v.RMS = make([]float64, g.N), make([]float64, g.N)
				if leak != nil {
					s.leak = newBand(leak)
					c.late = max(c.late, s.leak.late)
					v.Leak = make([]float64, g.N)
				}
			}
			c.vib = append(c.vib, s)
			out.Vib = append(out.Vib, v)
		}
		c.throw = append(c.throw, at)
		c.throws = append(c.throws, out)
	}
	c.hands = make([]hand, len(c.throws))
	for k := range c.hands {
		c.hands[k].perDeg = make([]float64, c.grids[k].N)
	}
	c.all = slices.Concat(c.press, c.vib)
	for vib := c.vib; impact != nil && len(vib) > 0; {
		n := min(len(vib), dsp.BankChannels)
		b, err := newBank(impact, leak, vib[:n])
		if err != nil {
			return nil, fmt.Errorf("turn: %w", err)
		}
		c.banks, vib = append(c.banks, b), vib[n:]
	}
	c.addOne = c.addPiece
	c.makeOne = c.throwOf
	return c, nil
}

// Add takes the next revolution and emits the turns that it completes: in steady running one, that of the second
// revolution before it. A Turn and everything in it is valid until the next one is emitted or until the next Add or
// Flush, whichever comes first; Clone what must live longer. Only f's contents are used, f may be reused.
func (c *Converter) Add(f *frame.Frame, emit func(*Turn)) {
	n := c.samples(f)
	c.join(f, emit)
	if n < 0 || f.Q&frame.Gap != 0 { // nothing can be leant on this one from either side
		why := whyGap
		if n < 0 {
			why = whyInput
		}
		c.cut(why, emit)
		c.lone = c.record(f)
		c.refuse(c.lone, why, emit)
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
	c.begin, c.lone = whyBegin, nil
}

// samples gives the number of samples per input of a frame, -1 when an input that is needed is missing or differs.
func (c *Converter) samples(f *frame.Frame) int {
	n := -1
	for _, s := range c.all {
		if s.ch.Input >= len(f.Counts) {
			return -1
		}
		if m := len(f.Counts[s.ch.Input]); n < 0 {
			n = m
		} else if m != n {
			return -1
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
	c.frame, c.skip, c.upTo = f, skip, n
	c.cfg.Do(len(c.banks)+len(c.press), c.addOne)
	for _, s := range c.vib {
		s.watch(f.Counts[s.ch.Input][skip:n], c.next)
	}
	c.frame = nil
	c.next = f.Seq0 + int64(n)
}

// addPiece gives the frame's new samples to a bank of accelerometers or to a pressure.
func (c *Converter) addPiece(i int) {
	if i < len(c.banks) {
		c.banks[i].add(c.frame.Counts, c.skip, c.upTo)
		return
	}
	s := c.press[i-len(c.banks)]
	s.add(c.frame.Counts[s.ch.Input][c.skip:c.upTo], c.next)
}

// drop forgets samples before seq.
func (c *Converter) drop(seq int64) {
	n := int(seq - c.base)
	if n <= 0 {
		return
	}
	for _, s := range c.all {
		s.drop(n, seq)
	}
	c.base = seq
}

// restart empties the history and begins it at sample seq. The filters begin settled on their first sample; the first
// turn that can be made begins 300° later or more, far beyond their memory.
func (c *Converter) restart(seq int64) {
	for _, s := range c.all {
		s.restart()
	}
	for _, b := range c.banks {
		b.filters.Reset()
	}
	c.base, c.next = seq, seq
}
