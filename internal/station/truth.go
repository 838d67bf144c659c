package station

import (
	"fmt"
	"math"

	"lapwing/internal/turn"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// found lists, for a summary, what the line has found out about its channels by itself and acts on.
func (l *Line) found() (out []string) {
	for i := range l.gauges.ch {
		if c := &l.gauges.ch[i]; !c.stated && c.say() != "" {
			out = append(out, c.id+": "+c.say())
		}
	}
	for _, z := range l.levels.off() {
		if math.Abs(z.Pa) >= leastRemark {
			out = append(out, fmt.Sprintf("%s: %+.3f bar of zero drift since the baseline taken off", z.Channel, z.Pa/1e5))
		}
	}
	return out
}

// remarkRipple says of the phase reference what is known of the shaft's ripple where that is computed, and why it is not.
func (l *Line) remarkRipple(out []wire.Channel) {
	if l.uneven == nil || l.slip.channel < 0 {
		return
	}
	c := &out[l.slip.channel]
	if say := l.uneven.Say(); say != "" {
		if c.Reason != "" {
			say = c.Reason + "; " + say
		}
		c.Reason = say
	}
}

// change makes the line undo other gauge passages from the next revolution on. The revolutions under way are lost to the
// middle (four turns that are not valid, once), what the windows have learnt of the valves' lags begins anew, as every
// opening moves, and so does a learning run.
func (l *Line) change() error {
	cfg := l.angles
	cfg.Throws = append([]turn.ThrowConfig(nil), cfg.Throws...)
	l.gauges.configure(&cfg)
	turns, err := turn.New(cfg)
	if err != nil {
		return err
	}
	l.turns.Flush(l.turn)
	l.turns = turns
	l.windows = window.NewTracker(window.Config{Works: works(l.sk)})
	l.learnAgain()
	return nil
}
