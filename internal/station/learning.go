package station

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"lapwing/internal/duty"
	"lapwing/internal/turn"
	"lapwing/internal/verdict"
)

// LearnPlan says which turns a person has declared healthy: a range of turn numbers, or the next Steady turns; and what
// becomes of what is learnt.
type LearnPlan struct {
	From, To int64 // turn numbers, To not included; used when Steady is 0
	Steady   int   // this many steady turns of every throw, from now on

	By, Note string // who says so, and why
	Subject  string // the part that was worked on: it alone is learnt anew; empty: everything
	Add      bool   // load steps that the baseline in force has not seen are added to it; with a Subject, those at which that part has not been learnt anew yet
	Propose  bool   // what was learnt waits for AcceptLearning; otherwise it is in force at once
}

func (p LearnPlan) wanted() bool { return p.Steady > 0 || p.To > p.From }

func (p LearnPlan) kind() duty.Kind {
	switch {
	case p.Subject != "":
		return duty.Renewed
	case p.Add:
		return duty.Added
	}
	return duty.Learnt
}

// study is a learning run of the line, from its beginning to a person's word about it.
type study struct {
	touched  []int           // of a renewal: the features learnt anew
	over     *duty.Baseline  // the baseline that was in force when it began, whole
	proposal *duty.Baseline  // the run has ended and waits
	coverage []duty.Coverage // of the run that has ended
}

// ErrLearning is wrapped by orders about learning that cannot be carried out now.
var ErrLearning = errors.New("learning")

func cannotLearn(format string, a ...any) error {
	return fmt.Errorf("%w: %s", ErrLearning, fmt.Sprintf(format, a...))
}

// StartLearning begins a run. While it lasts, the baseline in force goes on judging; of a renewal, what the work has
// touched is withheld.
func (l *Line) StartLearning(p LearnPlan) error {
	switch {
	case l.learner != nil:
		return cannotLearn("a run is on, %d of %d steady turns: wait for its end, or drop it", l.learnt, l.learn.Steady)
	case l.study.proposal != nil:
		return cannotLearn("what was learnt last waits for a word: accept or drop it first")
	case (p.Subject != "" || p.Add) && l.base == nil:
		return cannotLearn("no baseline is in force that could be changed: learn the whole machine")
	case p.Steady < 0 || p.Steady > 0 && p.Steady < leastTurns:
		return cannotLearn("%d steady turns are too few: %d at least, %d are usual", p.Steady, leastTurns, l.sk.Detection.LearnTurns)
	}
	if p.Steady == 0 {
		p.Steady = max(leastTurns, l.sk.Detection.LearnTurns)
	}
	p.From, p.To = 0, 0
	s := study{over: l.base}
	var err error
	if p.Subject != "" {
		if s.touched, err = duty.Touched(l.layout, l.place(p.Subject)); err != nil {
			return cannotLearn("%v", err)
		}
	}
	learner, err := l.newLearner(p, &s)
	if err != nil {
		return err
	}
	if s.touched != nil && !p.Add {
		if err := l.judgeOn(l.base.Without(l.layout, s.touched), s.touched); err != nil {
			return err
		}
	}
	l.learner, l.study, l.learn, l.learnt = learner, s, p, 0
	clear(l.steady)
	return nil
}

func (l *Line) newLearner(p LearnPlan, s *study) (*duty.Learner, error) {
	switch {
	case p.Subject != "" && p.Add:
		return duty.NewContinuation(l.layout, l.learnConfig(), s.over, s.touched)
	case p.Subject != "":
		return duty.NewRenewal(l.layout, l.learnConfig(), s.over, s.touched)
	case p.Add:
		return duty.NewAddition(l.layout, l.learnConfig(), s.over)
	}
	return duty.NewLearner(l.layout, l.learnConfig()), nil
}

// learnAgain begins a run that is on anew: what was measured so far was measured otherwise.
func (l *Line) learnAgain() {
	if l.learner == nil {
		return
	}
	if n, err := l.newLearner(l.learn, &l.study); err == nil { // what could begin can begin again
		l.learner = n
	}
	l.learnt = 0
	clear(l.steady)
}

// declares tells whether a run says of the channels too that they are as they should be: all of a run over the whole
// machine, and a renewal that may have changed a channel. Work on a valve leaves what is usual on the channels alone.
func (l *Line) declares(turn int64) bool {
	switch {
	case l.learner == nil || l.learn.Add:
		return false
	case l.learn.Subject != "" && strings.Count(l.place(l.learn.Subject), ".") == 2 || strings.HasSuffix(l.learn.Subject, ".rings") || strings.HasSuffix(l.learn.Subject, ".packing"):
		return false
	}
	return l.learn.Steady > 0 || turn >= l.learn.From && turn < l.learn.To
}

// leastTurns that a load step is learnt from at all.
const leastTurns = 45

func (l *Line) learnConfig() duty.LearnConfig {
	return duty.LearnConfig{Steps: stepCodes(l.sk), Throws: len(l.sk.Throws), Want: l.sk.Detection.LearnTurns, NoWork: func(throw, step int) bool {
		for _, s := range dutySteps(l.sk, throw) {
			if s.Code == step {
				return s.Idle == [2]bool{true, true}
			}
		}
		return false
	}}
}

// place names what stands on a channel when a person names the channel.
func (l *Line) place(subject string) string {
	for i := range l.sk.Throws {
		t := &l.sk.Throws[i]
		for e := range t.Ends {
			if subject == t.Ends[e].Pressure && subject != "" {
				return l.sk.EndName(i, e)
			}
		}
		if slices.Contains(t.Accel, subject) {
			return t.ID + ".vibration"
		}
	}
	return subject
}

// Renew begins a run that learns anew what work on a part has touched, and withholds it from judgement meanwhile.
func (l *Line) Renew(subject, by, note string, turns int) error {
	if subject == "" {
		return cannotLearn("it is not said what was worked on")
	}
	return l.StartLearning(LearnPlan{Steady: turns, Subject: subject, By: by, Note: note, Propose: true})
}

// AcceptLearning puts what was learnt in force and gives it, to be stored. While the run is still on it is ended early
// instead, and nothing is in force yet: the proposal can then be looked at, and accepted or dropped.
func (l *Line) AcceptLearning(by string) (*duty.Baseline, error) {
	if l.learner != nil {
		if _, err := l.propose(); err != nil {
			return nil, cannotLearn("the run cannot end yet: %v", err)
		}
		return nil, nil
	}
	b := l.study.proposal
	if b == nil {
		return nil, cannotLearn("nothing waits for a word")
	}
	accepted := *b
	if by != "" && by != accepted.By {
		accepted.Note = noted(accepted.Note, "accepted by "+by)
	}
	if err := l.inForce(&accepted); err != nil {
		return nil, err
	}
	return &accepted, nil
}

// noted adds to a note.
func noted(note, more string) string {
	if note = strings.TrimSpace(note); note == "" {
		return more
	}
	return note + "; " + more
}

// inForce ends a study with its outcome in force.
func (l *Line) inForce(b *duty.Baseline) error {
	var err error
	if l.study.touched != nil {
		err = l.judgeOn(b, l.study.touched)
	} else if l.learn.Add {
		err = l.judgeOn(b, nil)
	} else {
		err = l.judgeBy(b)
	}
	if err == nil {
		l.study = study{}
	}
	return err
}

// ImportBaseline lets a baseline that was learnt elsewhere or before wait for a person's word. The caller has checked
// that it fits.
func (l *Line) ImportBaseline(b *duty.Baseline, by, note string) error {
	if l.learner != nil || l.study.proposal != nil {
		return cannotLearn("a run is on or what was learnt last waits: accept or drop it first")
	}
	c := *b
	c.Note = noted(c.Note, "imported by "+by+": "+note)
	l.learn, l.learnt, l.study = LearnPlan{By: by, Note: note, Propose: true}, 0, study{over: l.base, proposal: &c}
	return nil
}

// DropLearning throws a run or its outcome away. Of a renewal, the baseline of before is whole again.
func (l *Line) DropLearning() (string, error) {
	said := ""
	switch {
	case l.learner != nil:
		said = fmt.Sprintf("the learning run is thrown away after %d steady turns", l.learnt)
	case l.study.proposal != nil:
		said = "what was learnt is thrown away"
	default:
		return "", cannotLearn("nothing is being learnt and nothing waits")
	}
	if l.study.touched != nil {
		if err := l.judgeOn(l.study.over, l.study.touched); err != nil {
			return "", err
		}
		said += "; the baseline of before the work judges again"
	}
	l.learner, l.study = nil, study{}
	return said, nil
}

// Proposal is what was learnt and waits for a person's word; nil: nothing.
func (l *Line) Proposal() *duty.Baseline { return l.study.proposal }

// teach adds a turn to a learning run and ends the run when it is due.
func (l *Line) teach(t *turn.Turn, o *Output) {
	if l.learner == nil {
		return
	}
	byRange := l.learn.Steady == 0
	if !byRange || (t.Number >= l.learn.From && t.Number < l.learn.To) {
		works := slices.ContainsFunc(l.points, func(p duty.Point) bool { return p.State == duty.Steady })
		least := math.MaxInt
		for i := range l.points {
			l.learner.Add(i, l.points[i], &l.vec)
			if s := l.points[i].State; s == duty.Steady || works && s == duty.Unloaded { // a throw that rests has nothing to learn
				l.steady[i]++
			}
			if l.concerns(i) {
				least = min(least, l.steady[i])
			}
		}
		l.learnt = least
	}
	if (byRange && t.Number < l.learn.To-1) || (!byRange && l.learnt < l.learn.Steady) {
		return
	}
	l.endLearning(t.Time, o)
}

// concerns tells whether a throw is part of the run.
func (l *Line) concerns(throw int) bool {
	return l.study.touched == nil || slices.ContainsFunc(l.study.touched, func(f int) bool { return l.layout[f].Throw == throw })
}

// endLearning ends the run. at is the sample clock.
func (l *Line) endLearning(at float64, o *Output) {
	l.clock = at
	b, err := l.propose()
	if err == nil && !l.learn.Propose {
		if err = l.inForce(b); err == nil {
			o.Baseline = b
			return
		}
	}
	if err != nil {
		o.LearnError = err
		if l.study.touched != nil {
			err = l.judgeOn(l.study.over, l.study.touched)
			o.LearnError = errors.Join(o.LearnError, err)
		}
		l.learner, l.study = nil, study{}
		return
	}
	o.Proposed = b
}

// propose makes a baseline of the run so far, examines it and lets it wait.
func (l *Line) propose() (*duty.Baseline, error) {
	h := duty.Header{SkidHash: l.sk.Hash, Created: l.utc(l.clock), Kind: l.learn.kind(), Subject: l.learn.Subject, By: l.learn.By, Note: l.learn.Note, Passages: l.gauges.inForce(), Zeros: l.levels.off()}
	if h.Kind != duty.Learnt {
		h.Over = l.base.Created
	}
	b, err := l.learner.Fit(h)
	if err != nil {
		return nil, err
	}
	b.Doubts = b.Examine(l.layout, l.exponent)
	l.study.coverage = l.learner.Coverage()
	l.learner, l.study.proposal = nil, b
	return b, nil
}

// exponent is the gas's own volume exponent at a throw's duty; the suction temperature is the skid file's.
func (l *Line) exponent(throw int, _, ps, pd float64) float64 {
	if stage := l.sk.Throws[throw].Stage; stage <= len(l.sk.Process.Stages) {
		if p, ok := l.gas.at(ps, l.sk.Process.Stages[stage-1].Ts, pd); ok {
			return p.KV
		}
	}
	return math.NaN()
}

// judgeBy puts a baseline in force.
func (l *Line) judgeBy(b *duty.Baseline) error {
	ref, err := b.Reference(l.layout)
	if err != nil {
		return err
	}
	fresh := l.ref == nil
	l.base, l.ref = b, ref
	l.gauges.hold(b.Passages)
	l.slip.Anew()
	if l.levels.anew(); fresh {
		l.levels.take(b.Zeros)
	}
	l.blocks = duty.NewBlocks(ref, duty.BlockConfig{Turns: l.sk.Detection.BlockTurns})
	l.judge = verdict.New(l.layout, verdict.Config{Channels: judgeChannels(l.sk), Start: float64(l.info.Start.Unix())})
	return nil
}

// judgeOn puts a baseline in force that differs from the present one in some features only: what is known of the rest
// stays known.
func (l *Line) judgeOn(b *duty.Baseline, touched []int) error {
	if l.judge == nil {
		return l.judgeBy(b)
	}
	heard, slow := l.judge.Snapshot(), l.blocks.SlowTests()
	if err := l.judgeBy(b); err != nil {
		return err
	}
	l.blocks.Resume(slow, touched)
	return l.judge.Restore(heard)
}
