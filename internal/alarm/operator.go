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
	ErrBy      = errors.New("a name is needed")
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

// Acknowledge says that a person has seen the alarm. Only what is shown as unacknowledged can be acknowledged.
func (a *Annunciator) Acknowledge(key, by string, now time.Time) (Transition, error) {
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
	out := a.finish(p, now, by, "acknowledged")
	return out, nil
}

// Reset takes back a latched alarm that has been acknowledged and whose condition has gone.
func (a *Annunciator) Reset(key, by string, now time.Time) (Transition, error) {
	p, err := a.act("reset", key, by)
	if err != nil {
		return Transition{}, err
	}
	if p.State != LatchedAcked {
		return Transition{}, refuse("reset", p)
	}
	p.Inner = Normal
	return a.finish(p, now, by, "reset"), nil
}

// Shelve hides the point until a given time. It goes on being evaluated; when the shelf ends while the condition
// stands, it comes back unacknowledged. Shelving again moves the end.
func (a *Annunciator) Shelve(key, by string, until, now time.Time) (Transition, error) {
	p, err := a.act("shelve", key, by)
	if err != nil {
		return Transition{}, err
	}
	if !until.After(now) {
		return Transition{}, fmt.Errorf("alarm: shelve %s until %s: %w", key, until.Format(time.RFC3339), ErrUntil)
	}
	if p.State == Shelved {
		return Transition{}, refuse("shelve", p)
	}
	p.ShelvedBy, p.ShelvedUntil = by, until
	return a.finish(p, now, by, "shelved until "+until.UTC().Format(time.RFC3339)), nil
}

// Unshelve ends a shelf before its time.
func (a *Annunciator) Unshelve(key, by string, now time.Time) (Transition, error) {
	p, err := a.act("unshelve", key, by)
	if err != nil {
		return Transition{}, err
	}
	if p.State != Shelved {
		return Transition{}, refuse("unshelve", p)
	}
	a.unshelve(p)
	return a.finish(p, now, by, "unshelved"), nil
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
	p.ShelvedBy, p.ShelvedUntil = "", time.Time{}
	if p.Inner == Acked {
		p.Inner = Unacked // whoever shelved it asked to be told again
	}
}

// expired gives the keys whose shelf has ended, sorted.
func (a *Annunciator) expired(now time.Time) []string {
	var keys []string
	for k, p := range a.points {
		if !p.ShelvedUntil.IsZero() && !now.Before(p.ShelvedUntil) {
			keys = append(keys, k)
		}
	}
	slices.Sort(keys)
	return keys
}
