package station

import (
	"fmt"
	"math"
	"time"

	"lapwing/internal/frame"
	"lapwing/internal/sensor"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// The daemon's own category in the words of NAMUR NE 107, and what it measures of itself, for the health message.

const (
	silentAfter = 5 * time.Second // without a block: every source gives many a second
	tooSlow     = 1.0             // load: the line no longer holds the pace
)

// condition is what the daemon's category is told from.
type condition struct {
	silent   time.Duration // since the newest block
	shaft    frame.State
	turns    int64
	channels []wire.Channel
	unsaid   int  // journal entries neither on disk nor sent
	judging  bool // a baseline is in force
	learning bool
	stuck    bool // process values stand still while the machine shows other ones
	lately   minute
	troubles []string // other than alarms of the machine
}

// category says how far the monitor's word can be relied upon, and why it is not good. Failure: nobody watches, or what is
// found reaches nobody. Function check: on purpose not judging, as while it learns. Out of specification: some valves are
// not judged, or not as often as they should be. Maintenance required: all is judged, and somebody should look at the
// monitor. A machine at rest is no fault of the monitor.
func (c *condition) category() (sensor.Category, string) {
	withdrawn, wanting, pressures := "", "", [2]int{}
	for i := range c.channels {
		ch := &c.channels[i]
		off := ch.State == sensor.Failure.String() || ch.State == sensor.OutOfSpecification.String()
		switch {
		case off && ch.Kind == "phase":
			return sensor.Failure, fmt.Sprintf("the shaft reference %s is in %s: no turn is measured", ch.ID, ch.State)
		case off && withdrawn == "":
			withdrawn = fmt.Sprintf("channel %s is in %s and is not used", ch.ID, ch.State)
		case ch.State == sensor.MaintenanceRequired.String() && wanting == "":
			wanting = fmt.Sprintf("channel %s requires maintenance", ch.ID)
		}
		if ch.Kind == "pressure" {
			pressures[0]++
			if off {
				pressures[1]++
			}
		}
	}
	switch {
	case c.silent >= silentAfter:
		return sensor.Failure, fmt.Sprintf("no samples have come for %s: look at converter, cable and source", c.silent.Round(time.Second))
	case c.shaft == frame.StateLost:
		return sensor.Failure, "the marks of the shaft reference stopped coming while the machine was at speed: no turn is measured"
	case pressures[0] > 0 && pressures[0] == pressures[1]:
		return sensor.Failure, "no cylinder pressure can be used: no valve is judged"
	case c.unsaid > 0:
		return sensor.Failure, fmt.Sprintf("%d entries of the journal cannot be written, and are not sent before they are", c.unsaid)
	case c.learning && !c.judging:
		return sensor.FunctionCheck, "a learning run is on: no valve is judged yet"
	case !c.judging:
		return sensor.FunctionCheck, "no baseline is in force: the machine is measured and not judged"
	case c.turns == 0 && c.shaft != frame.StateStandstill:
		return sensor.FunctionCheck, "no turn has been measured yet"
	case c.lately.dropped > 0:
		return sensor.OutOfSpecification, fmt.Sprintf("the line was too slow for %d blocks within the last minute: they were not analysed", c.lately.dropped)
	case c.lately.load > tooSlow:
		return sensor.OutOfSpecification, fmt.Sprintf("the line takes %.2f times as long as the samples last: it falls behind", c.lately.load)
	case withdrawn != "":
		return sensor.OutOfSpecification, withdrawn
	case c.lately.turns >= 10 && 2*c.lately.invalid > c.lately.turns:
		return sensor.OutOfSpecification, fmt.Sprintf("%d of the last %d turns were not valid", c.lately.invalid, c.lately.turns)
	case c.stuck:
		return sensor.OutOfSpecification, "the process values stand still while the cylinders show that the line pressures have moved"
	case wanting != "":
		return sensor.MaintenanceRequired, wanting
	case len(c.troubles) > 0:
		return sensor.MaintenanceRequired, c.troubles[0]
	}
	return sensor.Good, ""
}

// tellOfSelf completes a health message with the daemon's category and what it measures of itself. Compute goroutine.
func (s *Station) tellOfSelf(h *wire.Health, st *tape.Stats) {
	m, c := &s.meter, s.line.Count()
	h.Trouble = append(h.Trouble, captureTrouble(s.src, time.Now())...)
	_, want := s.line.Learnt()
	k := condition{silent: s.silent(), shaft: s.line.Phase().State, turns: c.Turns, channels: h.Channels, unsaid: len(s.unsaid), judging: s.line.Judging(),
		learning: want > 0, stuck: s.line.readings.stuck, lately: m.lately(s.info.Rate), troubles: h.Trouble}
	if s.line.Alarms().Flood() && len(k.troubles) == 1 { // the machine's, and the only thing said
		k.troubles = nil
	}
	cat, why := k.category()
	if k.silent >= silentAfter {
		h.Trouble = append(h.Trouble, why)
	}
	m.said.Store(int32(cat))
	h.Category, h.CategoryWhy = cat.String(), why
	if m.full > 0 {
		h.Load, h.LoadWorst = percent(k.lately.load), percent(k.lately.worst)
	}
	if q := m.queue.Load(); q != nil {
		h.Queue, h.QueueLimit = len(*q), cap(*q)
	}
	h.QueueMost = k.lately.queue
	for why, n := range c.Reasons {
		if h.BadBy == nil {
			h.BadBy = make(map[string]int64, len(c.Reasons))
		}
		h.BadBy[why] = n
	}
	if rate, ok := m.disk.see(st, time.Now()); ok {
		whole := math.Round(rate)
		h.Tape.Rate = &whole
	}
	if d, ok := notYetOnDisk(st, s.end, s.info.Rate); ok {
		sec := math.Round(d.Seconds()*100) / 100
		h.Tape.Behind = &sec
	}
}

func percent(share float64) *float64 {
	p := math.Round(share*1e4) / 100
	return &p
}

// silent is how long the source has given nothing. Compute goroutine.
func (s *Station) silent() time.Duration {
	last := s.heard
	if last.IsZero() {
		last = s.meter.began
	}
	if last.IsZero() { // not running yet
		return 0
	}
	return time.Since(last)
}
