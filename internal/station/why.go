package station

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/turn"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// How much a running line remembers of its reasons, per throw.
const (
	whyTurns  = 60 // four blocks of the usual length
	whyBlocks = 8
)

// reasons keeps what the last turns were compared with and how the last blocks were judged. It is the line's own; a nil
// one keeps nothing.
type reasons struct {
	throws []reasonRing
	block  func(*verdict.Explanation)                                                   // hears of every block; nil: nobody
	turn   func(throw int, t *turnReason, layout measure.Layout, devs []duty.Deviation) // and of every turn
}

type reasonRing struct {
	turns  []turnReason // whyTurns once full; the oldest at next
	next   int
	blocks []verdict.Explanation // oldest first
}

// turnReason is one turn of one throw.
type turnReason struct {
	turn   int64
	valid  bool
	reason string // why it was not valid, or not compared
	point  duty.Point
	devs   []duty.Deviation // of what the baseline has seen
}

func newReasons(throws int) *reasons { return &reasons{throws: make([]reasonRing, throws)} }

// add books one turn of one throw. devs are copied.
func (r *reasons) add(throw int, t *turn.Turn, p duty.Point, reason string, layout measure.Layout, devs []duty.Deviation) {
	if r == nil {
		return
	}
	g := &r.throws[throw]
	if len(g.turns) < whyTurns {
		g.turns = append(g.turns, turnReason{})
		g.next = len(g.turns) - 1
	}
	k := &g.turns[g.next]
	g.next = (g.next + 1) % whyTurns
	k.turn, k.valid, k.reason, k.point = t.Number, t.Valid(), reason, p
	k.devs = k.devs[:0]
	for i := range devs {
		if devs[i].Seen {
			k.devs = append(k.devs, devs[i])
		}
	}
	if r.turn != nil {
		r.turn(throw, k, layout, k.devs)
	}
}

// lost books a turn that could not be used at all.
func (r *reasons) lost(t *turn.Turn, points []duty.Point) {
	if r == nil {
		return
	}
	for i := range r.throws {
		var p duty.Point
		if i < len(points) {
			p = points[i]
		}
		r.add(i, t, p, t.Reason, nil, nil)
	}
}

// judged books how the newest block was judged.
func (r *reasons) judged(j *verdict.Judge) {
	if r == nil {
		return
	}
	x, ok := j.Explain()
	if !ok {
		return
	}
	g := &r.throws[x.Throw]
	if len(g.blocks) == whyBlocks {
		g.blocks = slices.Delete(g.blocks, 0, 1)
	}
	g.blocks = append(g.blocks, x)
	if r.block != nil {
		r.block(&x)
	}
}

// inOrder gives the turns, oldest first.
func (g *reasonRing) inOrder() []turnReason {
	if len(g.turns) < whyTurns {
		return g.turns
	}
	return append(slices.Clone(g.turns[g.next:]), g.turns[:g.next]...)
}

// notCompared says why a turn of a throw is compared with nothing; empty when it is.
func (l *Line) notCompared(throw int) string {
	p := l.points[throw]
	switch {
	case l.ref == nil:
		return "no baseline is in force: turns are measured, not judged"
	case p.State != duty.Steady && p.State != duty.Changing:
		return "the duty is " + p.State.String()
	}
	_, why := l.ref.Seen(throw, p)
	return why
}

// Why answers in the compute goroutine, between two turns.
func (s *Station) Why(ctx context.Context, subject string, turn int64) (w wire.Why, err error) {
	err = s.between(ctx, func() { w = s.line.why(subject, turn) })
	w.Skid = s.sk.ID
	return w, err
}

// why answers for a subject (empty: everything) and a turn (0: the newest; turns count from 1 when they are asked for).
func (l *Line) why(subject string, turnNumber int64) wire.Why {
	w := wire.Why{Version: 1, Skid: l.sk.ID, Subject: subject, Turn: turnNumber, Said: []string{}, Blocks: []wire.WhyBlock{}, Turns: []wire.WhyTurn{}, Points: []wire.Point{}, Caution: wire.Caution}
	say := func(format string, a ...any) { w.Said = append(w.Said, fmt.Sprintf(format, a...)) }
	for _, p := range l.alarms.Points() {
		if subject != "" && (wire.Within(p.Subject, subject) || p.Key == subject) {
			w.Points = append(w.Points, wire.FromState(&p))
		}
	}
	about, _, _ := strings.Cut(subject, "/") // an alarm point's key names its subject
	throw := -1
	if about != "" {
		if throw, _ = l.owner(about); throw < 0 {
			say("nothing on this machine is called %s", subject)
			return w
		}
	}
	if l.reasons == nil {
		say("reasons are not kept here")
		return w
	}
	for i := range l.reasons.throws {
		if throw < 0 || i == throw {
			l.whyThrow(&w, i, about, turnNumber, say)
		}
	}
	for i := range w.Points {
		if p := &w.Points[i]; p.Shelf != nil || p.Out != nil || p.ByDesign != "" {
			say("the alarm point %s is %s: %s", p.Key, p.State, p.Note)
		}
	}
	return w
}

func (l *Line) whyThrow(w *wire.Why, throw int, about string, turnNumber int64, say func(string, ...any)) {
	g := &l.reasons.throws[throw]
	id := l.sk.Throws[throw].ID
	turns := g.inOrder()
	if len(turns) == 0 {
		say("%s: no turn has come yet", id)
		return
	}
	oldest, newest := turns[0].turn, turns[len(turns)-1].turn
	ask := turnNumber
	if ask == 0 {
		ask = newest
	} else if ask < oldest || ask > newest {
		say("%s: turn %d is not among those kept (%d to %d); lapwing review --why on its clip tells", id, ask, oldest, newest)
		return
	}
	keep := func(subject string) bool { return about == id || wire.Within(subject, about) }
	var at *verdict.Explanation // the block that holds the turn, or the newest before it
	for i := range g.blocks {
		if x := &g.blocks[i]; x.Turn0 <= ask && (turnNumber == 0 || x.Turn1 >= ask || at == nil) {
			at = x
		}
	}
	var shown map[int]bool
	if at != nil {
		shown = map[int]bool{}
		b := wire.FromExplanation(at, l.layout, keep, about != "")
		for i := range at.Cases {
			if about != "" && keep(at.Cases[i].Subject) {
				for _, e := range at.Cases[i].Evidence {
					shown[e.Feature] = true
				}
			}
		}
		if turnNumber == 0 && about != "" { // the last blocks: how it came to this
			for i := range g.blocks {
				if &g.blocks[i] != at {
					w.Blocks = append(w.Blocks, wire.FromExplanation(&g.blocks[i], l.layout, keep, false))
				}
			}
		}
		w.Blocks = append(w.Blocks, b)
	}
	for i := range turns {
		k := &turns[i]
		near := k.turn == ask || turnNumber == 0 && about != "" || at != nil && about != "" && k.turn >= at.Turn0 && k.turn <= at.Turn1
		if !near {
			continue
		}
		t := wireTurnReason(id, k)
		for d := range k.devs {
			if shown[k.devs[d].Feature] {
				t.Measures = append(t.Measures, wire.FromDeviation(&k.devs[d], l.layout))
			}
		}
		w.Turns = append(w.Turns, t)
		if k.turn != ask {
			continue
		}
		switch {
		case k.reason != "":
			say("%s: turn %d was not compared with the baseline: %s", id, ask, k.reason)
		case at != nil && ask > at.Turn1:
			say("%s: turn %d was compared; the block that it belongs to is not complete yet", id, ask)
		}
	}
	if at != nil {
		l.sayBlock(at, keep, say)
	}
	if at == nil && l.ref != nil {
		say("%s: no block of comparable turns has been complete since the start (%d turns make one), so nothing can be raised yet", id, l.sk.Detection.BlockTurns)
	}
}

// sayBlock says in words what a block came to.
func (l *Line) sayBlock(x *verdict.Explanation, keep func(string) bool, say func(string, ...any)) {
	where := fmt.Sprintf("turns %d to %d", x.Turn0, x.Turn1)
	var strongest *verdict.Reasoning
	raised := 0
	for i := range x.Cases {
		r := &x.Cases[i]
		if !keep(r.Subject) {
			continue
		}
		if r.Grade > verdict.None {
			raised++
			say("%s %s is %s by %s: %s", r.Subject, r.Kind, r.Grade, where, votes(r))
			continue
		}
		if r.Judged && (strongest == nil || r.Total > strongest.Total) {
			strongest = r
		}
	}
	switch {
	case raised == 0 && strongest != nil:
		say("%s: nothing is raised by %s; the strongest hypothesis is %s %s, with %s; %s", x.ID, where, strongest.Subject, strongest.Kind, votes(strongest), strings.Join(strongest.Missing, "; "))
	case raised == 0:
		why := map[string]bool{}
		for i := range x.Cases {
			if r := &x.Cases[i]; keep(r.Subject) && !r.Judged && !why[r.Why] {
				why[r.Why] = true
				say("%s could not be judged by %s: %s", r.Subject, where, r.Why)
			}
		}
	}
}

// votes lists what the classes say, as it grades.
func votes(r *verdict.Reasoning) string {
	var out, not []string
	for _, v := range r.Classes {
		if !math.IsNaN(v.LLR) {
			out = append(out, fmt.Sprintf("%s %.1f", v.Class, v.Median))
		} else {
			not = append(not, v.Class.String())
		}
	}
	if len(out) == 0 {
		return "no evidence"
	}
	said := strings.Join(out, ", ") + fmt.Sprintf(" (together %.1f, natural log)", r.Total)
	if len(not) > 0 {
		said += ", nothing of " + strings.Join(not, ", ")
	}
	return said
}

func wireTurnReason(throw string, k *turnReason) wire.WhyTurn {
	t := wire.WhyTurn{Type: "why-turn", Turn: k.turn, Throw: throw, Valid: k.valid, Step: k.point.Step, Compared: k.reason == "", Why: k.reason}
	if k.valid {
		t.Duty = k.point.State.String()
	}
	return t
}
