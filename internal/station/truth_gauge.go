package station

import (
	"fmt"
	"math"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/passage"
	"lapwing/internal/sensor"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// gauges finds the resonance of every gauge passage on steady loaded turns, spread over time, and has the line undo it
// from then on. What is undone changes every measure of its end, so it changes only while no baseline is in force: a
// learning run that was under way begins anew. With a baseline, what was undone while it was learnt stays; a passage
// that rings otherwise then, or otherwise than the skid file says, is a state of its channel. Where the skid file
// states a passage, that is undone and no other.
type gauges struct {
	ch      []gauge
	rate    float64
	open    bool // what is found may be undone
	changed bool // the line has to change over

	looking  bool
	turns    int64   // of the present look
	next     int64   // sample at which the next look begins
	every    float64 // s from look to look
	apart    int64   // turns from pair to pair after the first look
	spacing  int64   // turns from pair to pair
	length   float64
	refused  int // pairs in a row of another length
	wait     int64
	calm     bool // the newest turn could have been used
	at       int  // the gauge that is examined next; -1: still gathering
	pair     pairOfTurns
	sawFirst bool
}

// gauge is one pressure channel of a working end.
type gauge struct {
	id                         string
	throw, end, channel, input int
	stated                     bool
	now                        duty.Passage // in force; Hz 0: none
	seen                       passage.Found
	looked                     bool // seen is of the look that has just ended
	gone                       int  // looks in a row that found nothing
	list                       []gaugePair
	ok                         bool // the pair under way can be used
	opened                     []float64
}

// gaugePair is two turns of raw codes, with the sample positions in them at which valves opened.
type gaugePair struct {
	x      []int32
	opened []float64
}

// pairOfTurns is being copied: two whole revolutions from mark to mark.
type pairOfTurns struct {
	n     int // frames it has
	first int64
	seq0  int64
	to    int64 // sample after its last
	x     [][]int32
}

const (
	gaugePairs   = 16  // of two turns, for a look
	gaugeSpacing = 2   // turns between two pairs while nothing is known …
	gaugeWatch   = 24  // … and once it is
	gaugeEvery   = 600 // s from look to look
	gaugeSame    = .15 // share within which the turns of a look are of one length
	gaugeOther   = 12  // pairs in a row of another length: the machine has another speed now
	gaugeLong    = 4000
	// A passage has changed when its frequency is off by more than a twentieth and more than three half-widths, or its Q
	// by more than a factor of two. The speed of sound in it moves with the square root of the temperature: 30 K are 5 %.
	gaugeMoved, gaugeQ = .06, 2.
	gaugeGone          = 2 // looks in a row without a resonance where there was a clear one
	gaugeClear         = .35
	gaugeHarmless      = 80. // times the shaft speed, above which a passage does no harm (windows.md section 2)
)

func newGauges(sk *skid.Skid, rate float64) *gauges {
	g := &gauges{rate: rate, open: true, looking: true, spacing: gaugeSpacing, at: -1, every: gaugeEvery, apart: gaugeWatch}
	for i := range sk.Throws {
		for e := range 2 {
			end := &sk.Throws[i].Ends[e]
			ch, ok := sk.ChannelByID(end.Pressure)
			if !ok || !end.Works {
				continue
			}
			c := gauge{id: ch.ID, throw: i, end: e, input: ch.Input}
			for k := range sk.Channels {
				if sk.Channels[k].ID == ch.ID {
					c.channel = k
				}
			}
			if ch.Passage > 0 {
				c.stated, c.now = true, duty.Passage{Channel: ch.ID, Hz: ch.Passage, Q: ch.PassageQ}
			}
			g.ch = append(g.ch, c)
		}
	}
	g.pair.x = make([][]int32, len(g.ch))
	return g
}

// hold puts passages in force and lets nothing else come in: those that a baseline was learnt with.
func (g *gauges) hold(list []duty.Passage) {
	g.open = false
	g.take(list, true)
}

// take puts passages in force where the skid file states none. whole: a channel that is not among them has none.
func (g *gauges) take(list []duty.Passage, whole bool) {
	for i := range g.ch {
		c := &g.ch[i]
		if c.stated {
			continue
		}
		want := c.now
		if whole {
			want = duty.Passage{}
		}
		for _, p := range list {
			if p.Channel == c.id && p.Hz > 0 && p.Q > 0 && p.Hz < g.rate/4 {
				want = p
			}
		}
		g.changed = g.changed || want.Hz != c.now.Hz || want.Q != c.now.Q
		c.now = want
	}
}

// inForce lists what is undone beside what the skid file states.
func (g *gauges) inForce() (out []duty.Passage) {
	for i := range g.ch {
		if c := &g.ch[i]; !c.stated && c.now.Hz > 0 {
			out = append(out, c.now)
		}
	}
	return out
}

// configure tells the angle domain what to undo.
func (g *gauges) configure(c *turn.Config) {
	for i := range g.ch {
		p := &g.ch[i]
		c.Throws[p.throw].Pressure[p.end].Passage = turn.Passage{Hz: p.now.Hz, Q: p.now.Q}
	}
	g.changed = false
}

// frame copies raw samples of two revolutions now and then.
func (g *gauges) frame(f *frame.Frame) {
	p := &g.pair
	if !g.looking {
		if f.Seq0 < g.next {
			return
		}
		g.looking, g.turns, g.wait, g.refused, g.length = true, 0, 0, 0, 0
		for i := range g.ch {
			g.ch[i].list, g.ch[i].looked = g.ch[i].list[:0], false
		}
	}
	if g.at >= 0 {
		return
	}
	g.turns++
	switch {
	case p.n == 1 && f.Good() && f.Turn == p.first+1 && f.Seq0 <= p.to:
		g.copy(f)
	case p.n == 1:
		p.n = 0
	case p.n == 0 && g.calm && g.turns >= g.wait && f.Good():
		p.first, p.seq0, p.to, g.sawFirst = f.Turn, f.Seq0, f.Seq0, false
		for i := range g.ch {
			p.x[i], g.ch[i].ok, g.ch[i].opened = p.x[i][:0], true, g.ch[i].opened[:0]
		}
		g.copy(f)
	}
}

func (g *gauges) copy(f *frame.Frame) {
	p := &g.pair
	skip := int(p.to - f.Seq0)
	for i := range g.ch {
		x := f.Counts[g.ch[i].input]
		p.x[i] = append(p.x[i], x[min(skip, len(x)):]...)
		p.to = f.Seq0 + int64(len(x))
	}
	p.n++
}

// turn hears what a turn was like, and keeps a pair whose two turns were steady and followed. Once enough have been
// gathered it examines one channel a turn.
func (g *gauges) turn(t *turn.Turn, w window.Result, points []duty.Point, s *sensors, at time.Time) {
	if !g.looking {
		return
	}
	if g.at >= 0 {
		g.examine(t, s, at)
		return
	}
	p := &g.pair
	g.calm = false
	inPair := p.n > 0 && t.Number >= p.first && t.Number <= p.first+1
	for i := range g.ch {
		c := &g.ch[i]
		good := t.Valid() && points[c.throw].State == duty.Steady && w.Throws[c.throw].Ends[c.end].State == window.Following &&
			t.Throws[c.throw].Bad[c.end] == ""
		g.calm = g.calm || good
		if !inPair {
			continue
		}
		if c.ok = c.ok && good; !good {
			continue
		}
		for _, v := range [...]window.Event{window.SuctionOpens, window.DischargeOpens} {
			if a := w.Throws[c.throw].Ends[c.end].W[v].Angle; !math.IsNaN(a) {
				if x := t.Throws[c.throw].SampleAt(a) - float64(p.seq0); x >= 0 && x < float64(p.to-p.seq0) {
					c.opened = append(c.opened, x)
				}
			}
		}
	}
	switch {
	case p.n == 0:
	case t.Number == p.first:
		g.sawFirst = true
	case t.Number > p.first:
		if t.Number == p.first+1 && g.sawFirst && p.n == 2 {
			g.keep()
		}
		p.n = 0
		g.wait = g.turns + g.spacing
	}
	g.ready()
}

// keep adds the pair to the channels that it was good for.
func (g *gauges) keep() {
	n := float64(g.pair.to - g.pair.seq0)
	if g.length > 0 && math.Abs(n/g.length-1) > gaugeSame {
		if g.refused++; g.refused < gaugeOther {
			return
		}
		for i := range g.ch {
			g.ch[i].list = g.ch[i].list[:0]
		}
		g.length = 0
	}
	g.refused = 0
	for i := range g.ch {
		if c := &g.ch[i]; c.ok && len(c.list) < gaugePairs {
			c.list = append(c.list, gaugePair{append([]int32(nil), g.pair.x[i]...), append([]float64(nil), c.opened...)})
			if g.length == 0 {
				g.length = n
			}
		}
	}
}

// ready begins the examination when every channel that gives pairs has enough of them.
func (g *gauges) ready() {
	most, least := 0, math.MaxInt
	for i := range g.ch {
		if n := len(g.ch[i].list); n > 0 {
			most, least = max(most, n), min(least, n)
		}
	}
	if most > 0 && least >= gaugePairs || g.turns > gaugeLong && most >= passage.LeastStretches {
		g.at, g.pair.n = 0, 0
	}
}

// examine looks at the next channel; after the last it draws the conclusions.
func (g *gauges) examine(t *turn.Turn, s *sensors, at time.Time) {
	for g.at < len(g.ch) {
		c := &g.ch[g.at]
		g.at++
		if len(c.list) < passage.LeastStretches {
			continue
		}
		list := make([]passage.Stretch, len(c.list))
		for k, p := range c.list {
			list[k] = passage.Stretch{X: make([]float64, len(p.x)), Opened: p.opened}
			for i, v := range p.x {
				list[k].X[i] = float64(v)
			}
		}
		c.seen, c.looked, c.list = passage.Find(g.rate, list), true, nil
		return
	}
	for i := range g.ch {
		if c := &g.ch[i]; c.looked {
			g.conclude(c, t, s, at)
		}
	}
	g.at, g.looking, g.spacing = -1, false, g.apart
	g.next = t.Seq1 + int64(g.every*g.rate)
}

// conclude says what a look means for a channel.
func (g *gauges) conclude(c *gauge, t *turn.Turn, s *sensors, at time.Time) {
	f := &c.seen
	if f.Valid() {
		c.gone = 0
	} else {
		c.gone++
	}
	found := duty.Passage{Channel: c.id, Hz: f.Hz, Q: f.Q, HzU: f.HzU, QU: f.QU, Fall: f.Fall, Orders: f.Orders, Found: at.UTC().Truncate(time.Second)}
	other := f.Valid() && c.differs(f)
	if g.open && !c.stated {
		switch {
		case f.Valid() && (c.now.Hz == 0 || other):
			c.now, g.changed = found, true
		case !f.Valid() && c.now.Hz > 0 && c.gone >= gaugeGone:
			c.now, g.changed = duty.Passage{}, true
		}
		s.Tell(c.channel, sensor.Gauge, t.Number, t.Seq0, "")
		return
	}
	if c.stated && f.Valid() && !other { // the file's own numbers have no intervals; a later look is held against them
		c.now.Fall, c.now.Orders = f.Fall, f.Orders
	}
	why := ""
	switch {
	case c.now.Hz == 0 || f.Orders > gaugeHarmless:
	case other:
		was := "it did when the baseline was learnt"
		if c.stated {
			was = "the skid file says"
		}
		why = fmt.Sprintf("%s: the gauge passage rings at %.0f Hz, Q %.1f, and not at %.0f Hz, Q %.1f, as %s, which goes on being undone: usually dirt, liquid or a changed fitting in the passage, or another gas; every opening angle of the end leans on it", c.id, f.Hz, f.Q, c.now.Hz, c.now.Q, was)
	case !f.Valid() && c.gone >= gaugeGone && c.now.Fall > gaugeClear && c.now.Orders < gaugeHarmless/2:
		why = fmt.Sprintf("%s: the gauge passage does not ring any more at the %.0f Hz that are undone: usually a passage that is partly plugged; pressures then come late and small", c.id, c.now.Hz)
	}
	if why == "" && !f.Valid() && c.gone < gaugeGone {
		return // after a restart what stood goes on standing
	}
	s.Tell(c.channel, sensor.Gauge, t.Number, t.Seq0, why)
}

// differs reports whether a passage found is not the one in force.
func (c *gauge) differs(f *passage.Found) bool {
	hz, q := math.Abs(math.Log(f.Hz/c.now.Hz)), math.Abs(math.Log(f.Q/c.now.Q))
	return hz > max(gaugeMoved, 3*f.HzU/f.Hz) || q > max(math.Log(gaugeQ), 2*f.QU/f.Q)
}

// say words what is undone on a channel; empty when nothing is, and nothing was found.
func (c *gauge) say() string {
	switch {
	case c.stated:
		return fmt.Sprintf("gauge passage of %.0f Hz, Q %.1f undone, as the skid file says", c.now.Hz, c.now.Q)
	case c.now.Hz > 0:
		when := ""
		if c.now.Found.Year() > 1970 { // a recording without a start is taken to begin in 1970
			when = c.now.Found.Format(" on 2006-01-02 at 15:04 UTC")
		}
		return fmt.Sprintf("gauge passage of %.0f Hz, Q %.1f (±%.0f Hz, ±%.1f) found on steady turns%s, undone since", c.now.Hz, c.now.Q, c.now.HzU, c.now.QU, when)
	case c.seen.Valid() && c.looked:
		return fmt.Sprintf("gauge passage of %.0f Hz, Q %.1f found and not undone, as the baseline in force was learnt without: it comes into force with the next learning run that begins without a baseline", c.seen.Hz, c.seen.Q)
	}
	return ""
}

// remark puts what is undone beside the channels that are otherwise good.
func (g *gauges) remark(out []wire.Channel) {
	for i := range g.ch {
		if c := &out[g.ch[i].channel]; c.Reason == "" {
			c.Reason = g.ch[i].say()
		}
	}
}
