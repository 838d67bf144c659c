package turn

import "lapwing/internal/frame"

// record is what is kept of a frame besides its samples.
type record struct {
	turn, seq0   int64
	mark0, mark1 float64
	inner        []float64
	q            frame.Quality
	revs         int64 // revolutions it spans, as far as the next frame's number tells
}

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
	whyRipple   = "phase: the ripple given for this turn is impossible"
	whyShort    = "samples missing at the ends of the turn"
	neighbour   = " (in a neighbouring revolution)"
)

func (c *Converter) record(f *frame.Frame) *record {
	var r *record
	if n := len(c.spare); n > 0 {
		r, c.spare = c.spare[n-1], c.spare[:n-1]
	} else {
		r = new(record)
	}
	*r = record{turn: f.Turn, seq0: f.Seq0, mark0: f.Mark0, mark1: f.Mark1, inner: append(r.inner[:0], f.Inner...), q: f.Q, revs: 1}
	return r
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
	case r.revs > 1:
		return whyCount
	}
	return ""
}

// join looks at how a frame follows the one before it: whether it joins, and how many revolutions that one spans.
func (c *Converter) join(f *frame.Frame, emit func(*Turn)) {
	if l := c.lone; l != nil { // refused already, so only its further revolutions are to be told
		c.lone = nil
		c.spare = append(c.spare, l)
		if f.Mark0 == l.mark1 && f.Turn > l.turn+1 {
			l.revs = f.Turn - l.turn - 1
			l.turn++
			c.refuse(l, c.begin, emit)
		}
		return
	}
	if len(c.recs) == 0 {
		return
	}
	l := c.recs[len(c.recs)-1]
	switch {
	case f.Seq0 > c.next || f.Seq0 < c.base:
		c.cut(whyGap, emit)
	case f.Mark0 != l.mark1 || f.Turn <= l.turn:
		c.cut(whyCount, emit)
	default:
		l.revs = f.Turn - l.turn
	}
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
