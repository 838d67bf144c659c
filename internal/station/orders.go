package station

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"sync/atomic"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/panel"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// Order is what a person asks of the station, whichever way it comes.
type Order = wire.Order

const (
	ordersWait   = 16    // orders that may wait for the compute goroutine
	unsaidAtMost = 10000 // entries not on disk, beyond which orders are refused: memory is bounded too
	clipAhead    = 10 * time.Minute
)

// errNotBuilt is the answer to a verb that is known and cannot be carried out by this build.
var errNotBuilt = errors.New("not built in")

// request is something that must happen in the compute goroutine. Whoever sets taken first decides: the compute
// goroutine, which then does it, or the asker, who withdraws.
type request struct {
	do    func()
	taken atomic.Bool
	done  chan struct{}
}

// Order hands an order to the compute goroutine, where it is carried out between two turns, and waits for the answer. An
// order that is refused is no error: the receipt says so. An error means that it was not carried out.
func (s *Station) Order(ctx context.Context, o Order) (r wire.Receipt, err error) {
	if err = s.between(ctx, func() { r = s.execute(o) }); err != nil {
		return wire.Receipt{}, fmt.Errorf("station: order: %w", err)
	}
	return r, nil
}

// between has something done by the compute goroutine between two turns, and waits for it. An error means that it was
// not done and will not be.
func (s *Station) between(ctx context.Context, do func()) error {
	a := &request{do: do, done: make(chan struct{})}
	select {
	case <-s.ended:
		return panel.ErrNotRunning
	default:
	}
	select {
	case s.orders <- a:
	default:
		return panel.ErrBusy
	}
	var why error
	select {
	case <-a.done:
		return nil
	case <-ctx.Done():
		why = fmt.Errorf("%w: %w", panel.ErrBusy, ctx.Err())
	case <-s.ended:
		why = panel.ErrNotRunning
	}
	if a.taken.CompareAndSwap(false, true) {
		return fmt.Errorf("withdrawn: %w", why)
	}
	<-a.done
	return nil
}

// carryOut does what waits, unless its asker has gone. Compute goroutine.
func (s *Station) carryOut(a *request) {
	if a.taken.CompareAndSwap(false, true) {
		a.do()
		close(a.done)
	}
}

// serveOrders goes on carrying orders out after the source has ended, while the page is still up.
func (s *Station) serveOrders(ctx context.Context) {
	for {
		select {
		case <-ctx.Done():
			return
		case a := <-s.orders:
			s.carryOut(a)
		}
	}
}

// lineNow is the present by the sample clock, which no step of the wall clock moves. Where the source is silent it goes
// on by the monotonic clock. Compute goroutine.
func (s *Station) lineNow() time.Time {
	t := s.line.utc(float64(s.end) / s.info.Rate)
	if !s.o.Fast && !s.heard.IsZero() {
		t = t.Add(time.Since(s.heard))
	}
	return t
}

// execute carries an order out or refuses it, and books it with everything that it changed in one transaction.
func (s *Station) execute(o Order) wire.Receipt { return s.decide(o, nil) }

// decide is execute; with a refusal the order is only booked as refused.
func (s *Station) decide(o Order, refusal error) wire.Receipt {
	now := s.lineNow()
	alarms := s.line.Alarms()
	o = s.named(o)
	act := alarm.Act{ID: s.lastAct + 1, After: alarms.Last(), At: now, Verb: o.Verb, Key: o.Key, Subject: o.Subject, By: o.By, Reason: o.Reason, Via: o.Via}
	r := wire.Receipt{Version: 1, Journal: s.desk.id, Caution: wire.Caution}
	if len(s.unsaid) >= unsaidAtMost {
		act.ID, act.Said = 0, "the journal cannot be written: no order is carried out until the disk takes it again"
		r.Act = wire.FromAct(&act)
		return r
	}
	s.lastAct = act.ID
	err := refusal
	if err == nil {
		err = o.Check()
	}
	var d done
	if err == nil {
		d, err = s.do(o, now)
	}
	act.Accepted, act.Said, act.Clip = err == nil, d.said, d.clip
	if err != nil {
		act.Said = strings.TrimPrefix(err.Error(), "alarm: ")
	}
	for i := range d.transitions {
		act.Transitions = append(act.Transitions, d.transitions[i].ID)
	}
	s.unsaid = append(s.unsaid, saying{act: &act})
	s.append(d.transitions)
	s.log.Info("order", "id", act.ID, "verb", act.Verb, "point", act.Key, "subject", act.Subject, "by", act.By, "via", act.Via, "accepted", act.Accepted, "said", act.Said)
	booked := s.commit()
	if booked != nil {
		s.log.Error("an order is not on disk yet", "id", act.ID, "err", booked)
	}
	s.publish(&Output{}, now)
	r.Act, r.OnDisk = wire.FromAct(&act), booked == nil
	return r
}

// named makes the texts of an order fit for the journal, whatever it holds; nobody stays nobody.
func (s *Station) named(o Order) Order {
	if o.Check() != nil {
		o = o.Clean()
	}
	return o
}

// done is what an order that was carried out has changed.
type done struct {
	said        string
	transitions []alarm.Transition
	clip        string
}

func (s *Station) do(o Order, now time.Time) (done, error) {
	one := func(tr alarm.Transition, err error) (done, error) {
		if err != nil {
			return done{}, err
		}
		return done{said: fmt.Sprintf("%s: %s, now %s", tr.Key, tr.Note, tr.To), transitions: []alarm.Transition{tr}}, nil
	}
	a := s.line.Alarms()
	switch o.Verb {
	case wire.VerbAcknowledge:
		return one(a.Acknowledge(o.Key, o.By, o.Reason, now))
	case wire.VerbReset:
		return one(a.Reset(o.Key, o.By, o.Reason, now))
	case wire.VerbShelve:
		until := o.Until
		if until.IsZero() {
			until = now.Add(time.Duration(o.ForS * float64(time.Second)))
		}
		return one(a.Shelve(o.Key, o.By, o.Reason, until, now))
	case wire.VerbUnshelve:
		return one(a.Unshelve(o.Key, o.By, o.Reason, now))
	case wire.VerbTakeOut:
		return one(a.TakeOut(o.Key, o.By, o.Reason, now))
	case wire.VerbReturn:
		return one(a.Return(o.Key, o.By, o.Reason, now))
	case wire.VerbCutClip:
		return s.cutClip(o, now)
	case wire.VerbRebirth:
		return s.rebirth()
	}
	return s.learnOrder(o)
}

// cutClip protects a stretch of raw samples that a person asks for. It has a label, so that it is not let go for room.
func (s *Station) cutClip(o Order, now time.Time) (done, error) {
	rate := s.info.Rate
	from, to := s.end-int64(math.Ceil(o.LastS*rate)), s.end
	if o.LastS == 0 {
		if s.info.Start.IsZero() {
			return done{}, errors.New("this source does not know its day: give last_s instead of from and to")
		}
		from, to = int64(math.Floor(o.From.Sub(s.info.Start).Seconds()*rate)), int64(math.Ceil(o.To.Sub(s.info.Start).Seconds()*rate))
		if o.To.Sub(now) > clipAhead {
			return done{}, fmt.Errorf("it ends %s ahead, at most %s are possible", o.To.Sub(now).Round(time.Second), clipAhead)
		}
	}
	if st := s.tape.Stats(); !st.OldestUTC.IsZero() && !s.info.Start.IsZero() && o.LastS == 0 && o.To.Before(st.OldestUTC) {
		return done{}, fmt.Errorf("the tape begins at %s: nothing of that time is left", st.OldestUTC.UTC().Format(time.RFC3339))
	}
	if from = max(from, s.first); to <= from {
		return done{}, errors.New("nothing of that time has been recorded by this run of the monitor")
	}
	c, err := s.cut(tape.Clip{ID: now.UTC().Format("20060102T150405Z") + "-hand-" + strconv.FormatUint(s.lastAct, 10),
		Reason: fmt.Sprintf("cut by hand: %s", o.Label), From: from, To: to})
	if err == nil && c.Label == "" {
		err = s.tape.Keep(c.ID, o.Label)
	} else if err == nil && !slices.Contains([]string{c.Label}, o.Label) {
		err = s.tape.Keep(c.ID, c.Label+"; "+o.Label)
	}
	if err != nil {
		return done{}, err
	}
	return done{said: fmt.Sprintf("%.1f s of raw samples are protected in clip %s", float64(to-from)/rate, c.ID), clip: c.ID}, nil
}

// expire ends shelves whose time has come also where no turn comes: the machine may stand. Compute goroutine.
func (s *Station) expire() error {
	now := s.lineNow()
	trs := s.line.Alarms().Step(now, nil)
	if len(trs) == 0 {
		return errors.Join(s.keepBaseline(), s.commit()) // what the disk refused is tried again
	}
	return s.take(&Output{Transitions: trs, At: now, Vector: &s.line.vec, Points: s.line.points})
}
