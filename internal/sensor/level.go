package sensor

import (
	"math"

	"lapwing/internal/dsp"
)

// Level follows the pressure zeros and sensitivities of one cylinder's ends against its baseline.
//
// Needs: steady turns, each with what a baseline leaves over of the zeros that the leak fit finds and of the four
// plateaus, and the line pressures.
// Waits: for blocks of 32 turns; three that agree before a sensitivity is doubted.
// Emits: the zero to be taken off each end, and the share by which its sensitivity is off.
// When it cannot (an end idle, no process values, fit and plateaus at odds): nothing is followed, nothing is doubted.
//
// A zero moves the fitted zero and both plateaus of its end by the same pressure; a sensitivity moves the plateaus in
// proportion and the fitted zero not at all; a leak moves neither by a per mille; a line transmitter moves both ends'
// plateaus alike. The zero at no pressure that the plateaus give must agree with the fitted one before it is believed.
type Level struct {
	end  [2]endLevel
	span [2]float64 // Pa, of the transducers
}

// LevelTurn is one steady turn of one cylinder. Pa; NaN where not known.
type LevelTurn struct {
	Time           float64    // s
	Zero           [2]float64 // of the leak fit, beyond the baseline's
	Suction        [2]float64 // plateau beyond the baseline's
	Discharge      [2]float64
	LinePs, LinePd float64
}

// endLevel is one end.
type endLevel struct {
	n        int
	zero     [levelTurns]float64
	s, d     [levelTurns]float64
	ps, pd   [levelTurns]float64
	began    float64
	offset   float64    // taken off
	gain     [3]float64 // of the newest blocks, newest first
	doubt    bool
	reported bool
	recent   [levelRecent]float64 // fitted zeros, in ring order
	k        int
	scratch  [levelTurns]float64
}

const (
	levelTurns  = 32
	levelRecent = 8
	levelRate   = 0.03 / 3600 // of suction pressure a second: a zero that moves faster is no thermal drift and is left to be seen
	levelShare  = 1. / 8      // of what is left that one block follows
	levelAgree  = .005        // of suction pressure, within which fitted zero and plateaus must agree
	levelMost   = .03         // of the span: more is not taken off
	levelReport = .005        // of the span: more is told
	levelBack   = .8          // of that, below which it is no longer
	levelGain   = .007        // share, from which a sensitivity is doubted …
	levelRight  = .004        // … and below which it is believed again
	levelApart  = .004        // by which suction and discharge may differ about it
	levelAlone  = .02         // the same where there is no second end to compare with
	levelCoarse = .03         // of suction pressure, beyond which opening angles lean
)

// NewLevel begins at the given zeros; spans in Pa.
func NewLevel(offset, span [2]float64) *Level {
	l := &Level{span: span}
	for e := range l.end {
		l.end[e].offset = offset[e]
		l.end[e].forget()
	}
	return l
}

// Anew begins again against another baseline, with the zeros that are taken off as they are.
func (l *Level) Anew() {
	for e := range l.end {
		l.end[e].forget()
	}
}

func (e *endLevel) forget() {
	e.n, e.doubt = 0, false
	for i := range e.recent {
		e.recent[i] = math.NaN()
	}
	for i := range e.gain {
		e.gain[i] = math.NaN()
	}
}

// Offset is the zero to be taken off an end's pressure, Pa: what it has drifted by since its first baseline.
func (l *Level) Offset(end int) float64 { return l.end[end].offset }

// Add takes a turn and reports whether a block of an end closed with it.
func (l *Level) Add(t *LevelTurn) (closed [2]bool) {
	for e := range l.end {
		d := &l.end[e]
		d.recent[d.k%levelRecent] = t.Zero[e]
		d.k++
		if math.IsNaN(t.Zero[e] + t.Suction[e] + t.Discharge[e] + t.LinePs + t.LinePd) {
			continue
		}
		if d.n == 0 {
			d.began = t.Time
		}
		d.zero[d.n], d.s[d.n], d.d[d.n], d.ps[d.n], d.pd[d.n] = t.Zero[e], t.Suction[e], t.Discharge[e], t.LinePs, t.LinePd
		if d.n++; d.n == levelTurns {
			d.n = 0
			closed[e] = true
			d.block(l.span[e], t.Time)
		}
	}
	for e := range l.end {
		if closed[e] {
			l.gains(e)
		}
	}
	return closed
}

func (e *endLevel) middle(x *[levelTurns]float64) float64 {
	e.scratch = *x
	return dsp.MedianInPlace(e.scratch[:])
}

// block follows the zero and takes the block's sensitivity.
func (e *endLevel) block(span, now float64) {
	z, s, d, ps, pd := e.middle(&e.zero), e.middle(&e.s), e.middle(&e.d), e.middle(&e.ps), e.middle(&e.pd)
	copy(e.gain[1:], e.gain[:])
	e.gain[0] = math.NaN()
	if !(ps > 0 && pd > 1.1*ps) {
		return
	}
	atNothing := (s*pd - d*ps) / (pd - ps)
	fits := math.Abs(z-atNothing) < max(levelAgree*ps*pd/(pd-ps), .4*math.Abs(z))
	if a, b := (s-z)/ps, (d-z)/pd; math.Abs(a-b) < max(levelApart, .3*math.Abs(a)) {
		e.gain[0] = (a + b) / 2
	}
	if !fits {
		return
	}
	most := levelRate * ps * max(0, now-e.began)
	e.offset += min(max(levelShare*z, -most), most)
	e.offset = min(max(e.offset, -levelMost*span), levelMost*span)
}

// gains says whether an end's sensitivity is to be doubted: three blocks of the same kind, and the other end, which
// hangs on the same lines, without it.
func (l *Level) gains(end int) {
	e, o := &l.end[end], &l.end[1-end]
	least, most := math.Inf(1), 0.
	for _, g := range e.gain {
		if math.IsNaN(g) || g*e.gain[0] < 0 {
			least = 0
			if math.IsNaN(g) {
				return // nothing new
			}
		}
		least, most = min(least, math.Abs(g)), max(most, math.Abs(g))
	}
	limit := levelGain
	if math.IsNaN(o.gain[0]) {
		limit = levelAlone
	} else if o.gain[0]*e.gain[0] > 0 && math.Abs(o.gain[0]) > math.Abs(e.gain[0])/2 {
		limit = math.Inf(1) // both alike: the lines' own transmitters
	}
	switch {
	case least > limit:
		e.doubt = true
	case most < levelRight:
		e.doubt = false
	}
}

// Gain is the share by which an end reads too much, and whether it is to be told.
func (l *Level) Gain(end int) (share float64, doubt bool) {
	e := &l.end[end]
	g := e.gain
	for _, v := range g {
		if math.IsNaN(v) {
			return math.NaN(), e.doubt
		}
	}
	return dsp.MedianInPlace(g[:]), e.doubt
}

// Drifted reports whether what is taken off an end is so much that it is to be told.
func (l *Level) Drifted(end int) bool {
	e := &l.end[end]
	limit := levelReport * l.span[end]
	if e.reported {
		limit *= levelBack
	}
	e.reported = math.Abs(e.offset) > limit
	return e.reported
}

// Coarse reports whether what is left of an end's zero, over the last turns, bends its opening angles: they must then
// not be held against the impacts. ps is the suction pressure.
func (l *Level) Coarse(end int, ps float64) bool {
	var w [levelRecent]float64
	n := 0
	for _, v := range l.end[end].recent {
		if !math.IsNaN(v) {
			w[n] = v
			n++
		}
	}
	return n >= levelRecent/2 && math.Abs(dsp.MedianInPlace(w[:n])) > levelCoarse*ps
}

// Set gives the zero to be taken off an end, Pa, as it was remembered.
func (l *Level) Set(end int, offset float64) {
	if e := &l.end[end]; !math.IsNaN(offset) {
		e.offset = min(max(offset, -levelMost*l.span[end]), levelMost*l.span[end])
	}
}
