package alarm

import (
	"cmp"
	"encoding/json"
	"fmt"
	"slices"
	"time"
)

// Figures for chatter and flood as ISA-18.2 and EEMUA 191 practice gives them (reference/methods.md 6.3,
// reference/handbook.md 9: chattering is three or more a minute; a flood begins above ten in ten minutes and ends
// below five).
const (
	chatterCount = 3
	chatterSpan  = time.Minute
	floodSpan    = 10 * time.Minute
	floodBegin   = 10 // more than this
	floodEnd     = 5  // fewer than this
)

// Timing is how a point's condition becomes an alarm and returns.
//
// A delay in turns counts evaluations that could judge the point, the first one included; with a delay in time as well,
// both must have passed.
type Timing struct {
	OnDelay, OffDelay time.Duration
	OnTurns, OffTurns int
	Latch             bool // stays until it is acknowledged and reset, though the condition has gone
}

// Config is fixed for the life of an Annunciator.
type Config struct {
	Default  Timing
	Points   map[string]Timing // by key, where a point differs
	MaxShelf time.Duration     // the longest shelf; default 24 h
	MaxGap   time.Duration     // a longer time between two evaluations (a restart, a clock step) counts for no delay; default 1 min
}

// Annunciator holds every alarm point. It has no clock: time is an argument. Not safe for concurrent use.
type Annunciator struct {
	cfg    Config
	points map[string]*Point
	nextID uint64
	order  int         // last place given in the first-up order
	recent []time.Time // activations of the last ten minutes
	flood  bool
	hidden bool // something changed that shows in no transition, since Saved
}

// New gives an annunciator with no points; a point comes into being with its first condition.
func New(cfg Config) *Annunciator {
	if cfg.MaxGap <= 0 {
		cfg.MaxGap = time.Minute
	}
	if cfg.MaxShelf <= 0 {
		cfg.MaxShelf = 24 * time.Hour
	}
	return &Annunciator{cfg: cfg, points: map[string]*Point{}, nextID: 1}
}

func (a *Annunciator) timing(key string) Timing {
	if t, ok := a.cfg.Points[key]; ok {
		return t
	}
	return a.cfg.Default
}

// Step evaluates the conditions in the order given and returns the visible changes in order. Expired shelving comes
// first, by key. Points that are not mentioned stay as they are. The first step from Unknown to Normal is silent: it
// is no news.
func (a *Annunciator) Step(now time.Time, conds []Condition) []Transition {
	var out []Transition
	for _, key := range a.expired(now) {
		p := a.points[key]
		a.unshelve(p)
		a.hidden = true // out of service it shows in nothing
		out = a.show(out, p, now, "", "shelving expired")
	}
	for i := range conds {
		out = a.evaluate(out, &conds[i], now)
	}
	a.count(now)
	return out
}

func (a *Annunciator) evaluate(out []Transition, c *Condition, now time.Time) []Transition {
	p := a.points[c.Key]
	if p == nil {
		p = &Point{Key: c.Key, Since: now}
		a.points[c.Key] = p
	}
	p.Subject, p.Kind = c.Subject, c.Kind
	p.Judged = c.Known && c.ByDesign == ""

	wasDesign := p.ByDesign
	p.ByDesign = c.ByDesign
	if c.ByDesign != "" {
		// Frozen: what a stopped or starting machine shows neither raises nor clears anything, and delays begin anew.
		p.rest()
		return a.show(out, p, now, "", c.ByDesign)
	}
	if !c.Known {
		p.Last = time.Time{} // the gap counts for no delay
		if wasDesign != "" {
			out = a.show(out, p, now, "", "no longer suppressed")
		}
		return out
	}
	dt := now.Sub(p.Last)
	if p.Last.IsZero() || dt < 0 || dt > a.cfg.MaxGap {
		dt = 0
	}
	p.Last = now
	inner, level := p.Inner, p.Level
	note := a.advance(p, c, dt, now)
	a.hidden = a.hidden || p.Inner != inner || p.Level != level
	return a.show(out, p, now, "", note)
}

// advance moves the point's inner state by one evaluation that could judge it.
func (a *Annunciator) advance(p *Point, c *Condition, dt time.Duration, now time.Time) (note string) {
	t := a.timing(p.Key)
	level := NoSeverity
	if p.Inner.Active() {
		level = p.Level
	}
	switch {
	case c.Severity > level:
		p.Falling, p.OffFor, p.OffTurns, p.OffLevel = false, 0, 0, NoSeverity
		if p.OnTurns++; !p.Rising {
			p.Rising, p.OnFor, p.OnTurns, p.OnLevel = true, 0, 1, c.Severity
		} else {
			p.OnFor += dt
			p.OnLevel = min(p.OnLevel, c.Severity)
		}
		if p.OnFor < t.OnDelay || p.OnTurns < t.OnTurns {
			return ""
		}
		fresh := !p.Inner.Active()
		p.Level = p.OnLevel
		p.Inner = Unacked // also when a worse level comes: it must be seen anew
		p.rest()
		a.book(p, c)
		if fresh {
			note = a.activation(p, now)
		}
	case c.Severity < level:
		p.Rising, p.OnFor, p.OnTurns, p.OnLevel = false, 0, 0, NoSeverity
		if p.OffTurns++; !p.Falling {
			p.Falling, p.OffFor, p.OffTurns, p.OffLevel = true, 0, 1, c.Severity
		} else {
			p.OffFor += dt
			p.OffLevel = max(p.OffLevel, c.Severity)
		}
		hold := t.OffDelay
		if p.Chattering {
			hold = max(hold, chatterSpan)
		}
		if p.OffFor < hold || p.OffTurns < t.OffTurns {
			return ""
		}
		to := p.OffLevel
		p.rest()
		if to > NoSeverity {
			p.Level = to
			a.book(p, c)
			return ""
		}
		if p.Chattering {
			p.Chattering, note = false, "no longer chattering"
		}
		a.book(p, c) // what is said from now on is how it is now, not how it was when it was raised
		a.returned(p, t)
	default:
		p.rest()
		if p.Inner == Unknown {
			p.Inner = Normal
		}
	}
	return note
}

// returned takes an active point out of its condition.
func (a *Annunciator) returned(p *Point, t Timing) {
	switch {
	case !p.Announced: // came and went behind a shelf: nobody has to acknowledge what nobody saw
		p.Inner = Normal
	case t.Latch && p.Inner == Unacked:
		p.Inner = LatchedUnacked
	case t.Latch:
		p.Inner = LatchedAcked
	case p.Inner == Unacked:
		p.Inner = ReturnedUnacked
	default:
		p.Inner = Normal
	}
	if p.Inner == Normal {
		a.clear(p)
	}
}

// clear ends an occurrence.
func (a *Annunciator) clear(p *Point) {
	p.Level, p.Announced, p.Order = NoSeverity, false, 0
	for _, q := range a.points {
		if q.Order > 0 {
			return
		}
	}
	a.order = 0 // nothing stands: the next alarm is first up again
}

// activation books a fresh alarm for first-up, chatter and flood.
func (a *Annunciator) activation(p *Point, now time.Time) (note string) {
	if p.Order == 0 {
		a.order++
		p.Order = a.order
	}
	p.Recent = recentOnly(append(p.Recent, now), now, chatterSpan)
	if len(p.Recent) >= chatterCount && !p.Chattering {
		p.Chattering = true
		note = fmt.Sprintf("chattering: %d activations within %s; held until it has been quiet for %s", len(p.Recent), chatterSpan, chatterSpan)
	}
	a.recent = append(a.recent, now)
	a.count(now)
	return note
}

// count keeps the flood flag.
func (a *Annunciator) count(now time.Time) {
	a.recent = recentOnly(a.recent, now, floodSpan)
	switch {
	case len(a.recent) > floodBegin:
		a.flood = true
	case len(a.recent) < floodEnd:
		a.flood = false
	}
}

// recentOnly drops what is older than span, and what a clock step has put into the future.
func recentOnly(ts []time.Time, now time.Time, span time.Duration) []time.Time {
	return slices.DeleteFunc(ts, func(t time.Time) bool { d := now.Sub(t); return d > span || d < 0 })
}

// book takes over what the condition says about itself.
func (a *Annunciator) book(p *Point, c *Condition) {
	p.Sentence, p.Turn, p.Seq0, p.Seq1, p.Detail = c.Sentence, c.Turn, c.Seq0, c.Seq1, nil
	if c.Detail != nil {
		if b, err := json.Marshal(c.Detail); err == nil {
			p.Detail = b
		} else { // the alarm is worth more than its attachment
			p.Detail, _ = json.Marshal(map[string]string{"error": fmt.Sprintf("alarm: %s: detail cannot be written: %v", p.Key, err)})
		}
	}
}

// show compares what is shown with what must be shown, and records the change.
func (a *Annunciator) show(out []Transition, p *Point, now time.Time, by, note string) []Transition {
	state, sev := p.shown()
	if state == p.State && sev == p.Severity {
		return out
	}
	if p.State == Unknown && state == Normal {
		p.State, p.Since = state, now
		return out
	}
	from := p.State
	if from == Unknown && state.Open() {
		from = Normal // where the diagram begins: that nothing had judged the point before is no state of the plant
	}
	tr := Transition{ID: a.nextID, Key: p.Key, Subject: p.Subject, Kind: p.Kind, From: from, To: state, Severity: sev, Was: p.Severity,
		At: now, Turn: p.Turn, Seq0: p.Seq0, Seq1: p.Seq1, Sentence: p.Sentence, By: by, Note: note, Order: p.Order, Flood: a.flood}
	if p.Detail != nil {
		tr.Detail = p.Detail
	}
	a.nextID++
	p.State, p.Severity, p.Since, p.Note = state, sev, now, note
	if state.Active() {
		p.Announced = true
	}
	return append(out, tr)
}

// Level is how severe the point's condition stands, shown or not: what a deadband needs to know.
func (a *Annunciator) Level(key string) Severity {
	if p := a.points[key]; p != nil && p.Inner.Active() {
		return p.Level
	}
	return NoSeverity
}

// Last is the id of the newest transition; 0 before the first.
func (a *Annunciator) Last() uint64 { return a.nextID - 1 }

// Unsaved reports whether a point has changed since Saved, be it behind a shelf, where no transition shows it: a restart
// must not forget that either.
func (a *Annunciator) Unsaved() bool { return a.hidden }

// Saved says that a snapshot of the present state is kept.
func (a *Annunciator) Saved() { a.hidden = false }

// GoOnAfter lets ids go on after one that a journal holds. A snapshot that was lost must not make them begin anew.
func (a *Annunciator) GoOnAfter(id uint64) { a.nextID = max(a.nextID, id+1) }

// Flood reports whether more alarms come in than a person can follow.
func (a *Annunciator) Flood() bool { return a.flood }

// Points gives a copy of every point, by key.
func (a *Annunciator) Points() []Point {
	out := make([]Point, 0, len(a.points))
	for _, p := range a.points {
		q := *p
		q.Recent = slices.Clone(p.Recent)
		out = append(out, q)
	}
	slices.SortFunc(out, func(x, y Point) int { return cmp.Compare(x.Key, y.Key) })
	return out
}

// Open gives the points that ask something of a person, first up first.
func (a *Annunciator) Open() []Point {
	out := slices.DeleteFunc(a.Points(), func(p Point) bool { return !p.State.Open() })
	slices.SortStableFunc(out, func(x, y Point) int { return cmp.Compare(x.Order, y.Order) })
	return out
}
