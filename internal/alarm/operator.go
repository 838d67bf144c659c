package alarm

import (
	"errors"
	"fmt"
	"slices"
	"time"
)

// What an operator may not do now. Wrapped with the key and the point's state.
var (
	ErrNoPoint = errors.New("no such alarm point")
	ErrState   = errors.New("not possible in this state")
	ErrUntil   = errors.New("shelving needs an end in the future")
	ErrTooLong = errors.New("a shelf must not last so long")
	ErrBy      = errors.New("a name is needed")
	ErrReason  = errors.New("a reason is needed")
)

func (a *Annunciator) act(verb, key, by string) (*Point, error) {
	p := a.points[key]
	if p == nil {
		return nil, fmt.Errorf("alarm: %s %s: %w", verb, key, ErrNoPoint)
	}
	if by == "" {
		return nil, fmt.Errorf("alarm: %s %s: %w", verb, key, ErrBy)
	}
	return p, nil
}

func refuse(verb string, p *Point) error {
	return fmt.Errorf("alarm: %s %s: %w: it is %s", verb, p.Key, ErrState, p.State)
}

// noted joins what was done and why.
func noted(done, why string) string {
	if why == "" {
		return done
	}
	return done + ": " + why
}

// Acknowledge says that a person has seen the alarm; a remark is welcome. Only what is shown as unacknowledged can be
// acknowledged.
func (a *Annunciator) Acknowledge(key, by, remark string, now time.Time) (Transition, error) {
	p, err := a.act("acknowledge", key, by)
	if err != nil {
		return Transition{}, err
	}
	switch p.State {
	case Unacked:
		p.Inner = Acked
	case ReturnedUnacked:
		p.Inner = Normal
	case LatchedUnacked:
		p.Inner = LatchedAcked
	default:
		return Transition{}, refuse("acknowledge", p)
	}
	return a.finish(p, now, by, noted("acknowledged", remark)), nil
}

// Reset takes back a latched alarm that has been acknowledged and whose condition has gone.
func (a *Annunciator) Reset(key, by, remark string, now time.Time) (Transition, error) {
	p, err := a.act("reset", key, by)
	if err != nil {
		return Transition{}, err
	}
	if p.State != LatchedAcked {
		return Transition{}, refuse("reset", p)
	}
	p.Inner = Normal
	return a.finish(p, now, by, noted("reset", remark)), nil
}

// Shelve hides the point until a given time, at most Config.MaxShelf away, for a reason. It goes on being evaluated;
// when the shelf ends while the condition stands, it comes back unacknowledged. To move the end, unshelve first: then
// the journal shows both.
func (a *Annunciator) Shelve(key, by, reason string, until, now time.Time) (Transition, error) {
	p, err := a.act("shelve", key, by)
	switch {
	case err != nil:
		return Transition{}, err
	case reason == "":
		return Transition{}, fmt.Errorf("alarm: shelve %s: %w", key, ErrReason)
	case !until.After(now):
		return Transition{}, fmt.Errorf("alarm: shelve %s until %s: %w", key, until.Format(time.RFC3339), ErrUntil)
	case until.Sub(now) > a.cfg.MaxShelf:
		return Transition{}, fmt.Errorf("alarm: shelve %s until %s: %w: %s at most; what needs longer is taken out of service", key, until.Format(time.RFC3339), ErrTooLong, a.cfg.MaxShelf)
	case p.State == Shelved || p.State == OutOfService || !p.ShelvedUntil.IsZero():
		return Transition{}, refuse("shelve", p)
	}
	p.ShelvedBy, p.ShelvedUntil, p.ShelvedWhy = by, until, reason
	return a.finish(p, now, by, noted("shelved until "+until.UTC().Format(time.RFC3339), reason)), nil
}

// Unshelve ends a shelf before its time.
func (a *Annunciator) Unshelve(key, by, remark string, now time.Time) (Transition, error) {
	p, err := a.act("unshelve", key, by)
	if err != nil {
		return Transition{}, err
	}
	if p.State != Shelved {
		return Transition{}, refuse("unshelve", p)
	}
	a.unshelve(p)
	return a.finish(p, now, by, noted("unshelved", remark)), nil
}

// TakeOut takes the point out of service, for a reason and without an end: for maintenance. It goes on being evaluated
// and is not shown until Return.
func (a *Annunciator) TakeOut(key, by, reason string, now time.Time) (Transition, error) {
	p, err := a.act("take out of service", key, by)
	switch {
	case err != nil:
		return Transition{}, err
	case reason == "":
		return Transition{}, fmt.Errorf("alarm: take out of service %s: %w", key, ErrReason)
	case p.State == OutOfService:
		return Transition{}, refuse("take out of service", p)
	}
	p.OutBy, p.OutWhy = by, reason
	return a.finish(p, now, by, noted("taken out of service", reason)), nil
}

// Return puts a point back into service; what stands comes back unacknowledged.
func (a *Annunciator) Return(key, by, remark string, now time.Time) (Transition, error) {
	p, err := a.act("return to service", key, by)
	if err != nil {
		return Transition{}, err
	}
	if p.State != OutOfService {
		return Transition{}, refuse("return to service", p)
	}
	p.OutBy, p.OutWhy = "", ""
	if p.Inner == Acked {
		p.Inner = Unacked
	}
	return a.finish(p, now, by, noted("returned to service", remark)), nil
}

// finish shows an operator's act and clears the occurrence when it has ended.
func (a *Annunciator) finish(p *Point, now time.Time, by, note string) Transition {
	out := a.show(nil, p, now, by, note)
	if p.Inner == Normal && p.Order > 0 {
		a.clear(p)
	}
	return out[0]
}

func (a *Annunciator) unshelve(p *Point) {
	p.ShelvedBy, p.ShelvedUntil, p.ShelvedWhy = "", time.Time{}, ""
	if p.Inner == Acked {
		p.Inner = Unacked // whoever shelved it asked to be told again
	}
}

// expired gives the keys whose shelf has ended, sorted. A clock that was set back keeps nothing hidden for longer than
// the longest shelf.
func (a *Annunciator) expired(now time.Time) []string {
	var keys []string
	for k, p := range a.points {
		if p.ShelvedUntil.IsZero() {
			continue
		}
		if p.ShelvedUntil.Sub(now) > a.cfg.MaxShelf {
			p.ShelvedUntil, a.hidden = now.Add(a.cfg.MaxShelf), true
		}
		if !now.Before(p.ShelvedUntil) {
			keys = append(keys, k)
		}
	}
	slices.Sort(keys)
	return keys
}
