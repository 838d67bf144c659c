package station

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/ledger"
	"lapwing/internal/wire"
)

// learningDesk is what the station keeps of learning runs beside the line.
type learningDesk struct {
	shown   atomic.Pointer[wire.Learning]
	at      time.Time // sample time at which it was shown last
	inForce uint64    // version of the baseline in force; 0: none of the stored ones
	dirty   bool      // the document on disk is not how things stand

	one      sync.Mutex                    // one import at a time
	imported atomic.Pointer[duty.Baseline] // on its way to the compute goroutine
}

const (
	docLearning = "learning run"
	showEvery   = 5 * time.Second // in sample time: coverage costs a sort
)

// learnDoc is what a restart must know of a learning run: the turns of one that is on are lost and it begins anew; one
// that waits for a word goes on waiting. Without it the part that was worked on would be judged by the old baseline.
type learnDoc struct {
	Plan     LearnPlan       `json:"plan"`
	Proposal json.RawMessage `json:"proposal,omitempty"`
}

// learnOrder carries out an order about learning.
func (s *Station) learnOrder(o Order) (done, error) {
	var d done
	var err error
	switch o.Verb {
	case wire.VerbLearnStart:
		p := LearnPlan{Steady: o.Turns, By: o.By, Note: o.Reason, Subject: o.Subject, Add: o.Add, Propose: !o.Auto}
		if err = s.line.StartLearning(p); err == nil {
			d.said = fmt.Sprintf("a learning run has begun: %d steady turns", s.line.learn.Steady)
			if p.Propose {
				d.said += ", then it waits to be accepted or dropped"
			}
		}
	case wire.VerbRenew:
		if err = s.line.Renew(o.Subject, o.By, o.Reason, o.Turns); err == nil {
			d.said = fmt.Sprintf("%d measures that work on %s has touched are learnt anew from %d steady turns, and are not judged until that is accepted", len(s.line.study.touched), o.Subject, s.line.learn.Steady)
		}
	case wire.VerbLearnAccept:
		var b *duty.Baseline
		if b, err = s.line.AcceptLearning(o.By); err != nil {
			break
		}
		if b == nil {
			s.proposed(s.line.Proposal())
			d.said = "the learning run is ended early; nothing is in force yet: look at what it gave, then accept or drop it"
			break
		}
		s.unkept = b
		d.said = fmt.Sprintf("the baseline of turns %d to %d is in force", b.Turn0, b.Turn1)
		if n := len(b.Doubts); n > 0 {
			d.said += fmt.Sprintf(", with %d doubts", n)
		}
	case wire.VerbImport:
		b := s.learning.imported.Swap(nil)
		if b == nil {
			err = cannotLearn("no file came with it")
		} else if err = s.line.ImportBaseline(b, o.By, o.Reason); err == nil {
			s.proposed(s.line.Proposal())
			d.said = fmt.Sprintf("the baseline of %s waits to be accepted or dropped", b.Created.UTC().Format(time.RFC3339))
		}
	case wire.VerbLearnDrop:
		if d.said, err = s.line.DropLearning(); err == nil {
			s.desk.say("learning", "")
		}
	default:
		err = fmt.Errorf("%s: %w", o.Verb, errNotBuilt)
	}
	if err != nil {
		return done{}, err
	}
	s.learning.dirty, s.learning.at = true, time.Time{}
	if err := s.keepBaseline(); err != nil {
		s.log.Error("a learning order is not on disk yet; trying again", "err", err)
	}
	return d, nil
}

// Import checks a baseline file and lets it wait for a person's word. Any goroutine.
func (s *Station) Import(ctx context.Context, raw []byte, anySkid bool, o Order) (wire.Receipt, error) {
	s.learning.one.Lock()
	defer s.learning.one.Unlock()
	b, err := duty.ParseBaseline(raw)
	if err == nil {
		err = b.Fits(s.line.layout, s.sk.Hash, anySkid)
	}
	if err != nil {
		r := wire.Receipt{Version: 1, Caution: wire.Caution}
		r.Type, r.Verb, r.By, r.Reason, r.Via, r.Said = "act", o.Verb, o.By, o.Reason, o.Via, err.Error()
		return r, nil
	}
	s.learning.imported.Store(b)
	defer s.learning.imported.Store(nil)
	return s.Order(ctx, o)
}

// proposed tells that a run has ended and waits.
func (s *Station) proposed(b *duty.Baseline) {
	s.learning.dirty, s.learning.at = true, time.Time{}
	s.desk.say("learning", fmt.Sprintf("a baseline was learnt or imported, with %d doubts, and waits to be accepted or dropped", len(b.Doubts)))
	s.log.Info("a learning run waits to be accepted or dropped", "first_turn", b.Turn0, "last_turn", b.Turn1, "doubts", len(b.Doubts))
	s.doubts(b)
}

func (s *Station) doubts(b *duty.Baseline) {
	for _, d := range b.Doubts {
		s.log.Warn("the machine may not have been healthy while it was learnt", "doubt", d.String())
	}
}

// keepBaseline writes what has changed of baseline and learning run and is not on disk yet; what the disk refuses is
// tried again with every turn.
func (s *Station) keepBaseline() error {
	b := s.unkept
	if b == nil && !s.learning.dirty {
		return nil
	}
	var version uint64
	err := s.ledger.Commit(func(tx *ledger.Tx) error {
		if b != nil {
			raw, err := b.Encode()
			if err != nil {
				return err
			}
			if version, err = tx.PutBaseline(noteOf(b), json.RawMessage(raw)); err != nil {
				return err
			}
		}
		d := learnDoc{Plan: s.line.learn}
		switch p := s.line.Proposal(); {
		case p != nil:
			raw, err := p.Encode()
			if err != nil {
				return err
			}
			d.Proposal = raw
		case s.line.learner == nil || !s.line.learn.Propose && s.o.Learn > 0: // --learn is asked for anew by whoever starts the daemon
			return tx.DeleteDoc(docLearning)
		}
		return tx.PutDoc(docLearning, d)
	})
	if err != nil {
		return fmt.Errorf("station: baseline: %w", err)
	}
	s.learning.dirty = false
	if b == nil {
		return nil
	}
	s.unkept, s.learning.inForce, s.learning.at = nil, version, time.Time{}
	s.log.Info("baseline in force", "version", version, "kind", b.Kind, "first_turn", b.Turn0, "last_turn", b.Turn1, "load_steps", len(b.Cells), "doubts", len(b.Doubts))
	s.doubtful(b)
	return nil
}

// doubtful keeps doubts about the baseline in force before people's eyes.
func (s *Station) doubtful(b *duty.Baseline) {
	s.desk.say("learning", "")
	if len(b.Doubts) == 0 {
		s.desk.say("baseline", "")
		return
	}
	said := make([]string, len(b.Doubts))
	for i, d := range b.Doubts {
		said[i] = d.String()
	}
	s.desk.say("baseline", "the machine may not have been healthy while the baseline in force was learnt: "+strings.Join(said, "; "))
}

func noteOf(b *duty.Baseline) string {
	n := string(b.Kind)
	if b.Subject != "" {
		n += " " + b.Subject
	}
	if b.By != "" {
		n += ", by " + b.By
	}
	if b.Note != "" {
		n += ": " + b.Note
	}
	return n
}

// resumeLearning goes on with the learning run of before a restart.
func (s *Station) resumeLearning() error {
	if s.line.base != nil {
		s.doubtful(s.line.base)
	}
	var d learnDoc
	ok, err := s.ledger.Doc(docLearning, &d)
	if err != nil || !ok || s.o.Learn > 0 {
		return err
	}
	if err := s.line.StartLearning(d.Plan); err != nil {
		s.log.Warn("the learning run of before cannot go on", "err", err)
		s.desk.say("learning", "the learning run of before the restart cannot go on: "+err.Error())
		s.learning.dirty = true
		return nil
	}
	if len(d.Proposal) == 0 {
		s.log.Info("the learning run of before begins anew", "steady_turns", d.Plan.Steady, "subject", d.Plan.Subject)
		return nil
	}
	b, err := duty.ParseBaseline(d.Proposal)
	if err == nil {
		_, err = b.Reference(s.line.layout)
	}
	if err != nil {
		s.log.Warn("what was learnt before and waited cannot be used: the run begins anew", "err", err)
		return nil
	}
	s.line.learner, s.line.study.proposal = nil, b
	s.desk.say("learning", fmt.Sprintf("a learning run has ended with %d doubts and waits to be accepted or dropped", len(b.Doubts)))
	return nil
}

// Learning tells what is being learnt, what waits, what is in force.
func (s *Station) Learning() *wire.Learning { return s.learning.shown.Load() }

// showLearning renews what Learning tells. Compute goroutine.
func (s *Station) showLearning(at time.Time) {
	d := &s.learning
	if d.shown.Load() != nil && !d.at.IsZero() && at.Sub(d.at).Abs() < showEvery {
		return
	}
	if d.at = at; at.IsZero() {
		d.at = time.Unix(0, 1)
	}
	l := s.line
	w := &wire.Learning{Version: 1, Skid: s.sk.ID, State: "none", Coverage: []wire.Covered{}}
	if l.base != nil {
		b := wireBaseline(l.base, d.inForce)
		b.InForce = true
		w.InForce = &b
	}
	if p := l.Proposal(); p != nil || l.learner != nil {
		w.Kind, w.Subject, w.By, w.Note, w.Withheld = string(l.learn.kind()), l.learn.Subject, l.learn.By, l.learn.Note, len(l.study.touched)
		if l.learn.Add {
			w.Withheld = 0
		}
		w.Turns, w.Want = l.learnt, l.learn.Steady
		if l.learn.Steady == 0 {
			w.Want = int(min(l.learn.To-l.learn.From, math.MaxInt32))
		}
		if w.State = "running"; p != nil {
			b := wireBaseline(p, 0)
			w.State, w.Proposed = "proposed", &b
		}
	}
	for _, c := range l.Coverage() {
		w.Coverage = append(w.Coverage, covered(s.sk.Throws[c.Throw].ID, &c))
	}
	w.Drifting = l.drifting()
	w.Said = saidOf(w)
	d.shown.Store(w)
}

// drifting lists the measures whose slow test signals.
func (l *Line) drifting() []wire.Drifting {
	out := []wire.Drifting{}
	if l.blocks == nil {
		return out
	}
	for _, t := range l.blocks.SlowTests() {
		d := wire.Drifting{Subject: t.Subject, Measure: t.Name, Way: "up", Limits: math.Round(math.Abs(t.Share())*100) / 100}
		if t.Share() < 0 {
			d.Way = "down"
		}
		if d.Limits >= 1 {
			out = append(out, d)
		}
	}
	return out
}

func saidOf(w *wire.Learning) string {
	switch {
	case w.State == "running":
		said := fmt.Sprintf("learning: %d of %d steady turns", w.Turns, w.Want)
		if w.Withheld > 0 {
			said += fmt.Sprintf("; %d measures touched by the work on %s are not judged meanwhile", w.Withheld, w.Subject)
		}
		return said
	case w.State == "proposed" && len(w.Proposed.Doubts) > 0:
		return fmt.Sprintf("a learning run has ended with %d doubts: look into them before it is accepted, or drop it", len(w.Proposed.Doubts))
	case w.State == "proposed":
		return "a learning run has ended without a doubt: accept or drop it"
	case w.InForce == nil:
		return "no baseline: the machine is measured and not judged"
	}
	return "a baseline is in force and nothing is being learnt"
}

func covered(throw string, c *duty.Coverage) wire.Covered {
	w := wire.Covered{Throw: throw, LoadStep: c.Step, Inferred: c.Inferred, Turns: c.Turns, Want: c.Want, Usable: c.MeetsMinimum, Missing: c.Missing}
	if c.Turns > 0 {
		round := func(x [2]float64, unit float64) *[2]float64 {
			return &[2]float64{math.Round(x[0]*unit*1000) / 1000, math.Round(x[1]*unit*1000) / 1000}
		}
		w.Ratio, w.RPM, w.Ps = round(c.Ratio, 1), round(c.RPM, 1), round(c.Ps, 1e-5)
	}
	return w
}

func wireBaseline(b *duty.Baseline, id uint64) wire.Baseline {
	w := wire.Baseline{ID: id, Created: b.Created, Kind: string(b.Kind), Subject: b.Subject, By: b.By, Note: b.Note, FirstTurn: b.Turn0, LastTurn: b.Turn1,
		Cells: len(b.Cells), Skid: b.SkidHash, Doubts: []string{}}
	for i := range b.Cells {
		w.Measures += len(b.Cells[i].Models)
	}
	for _, d := range b.Doubts {
		w.Doubts = append(w.Doubts, d.String())
	}
	return w
}
