package sensor

import (
	"errors"
	"fmt"
	"math"

	"lapwing/internal/frame"
)

// Defaults of Config.
const (
	DefaultLearn = 100
	DefaultHold  = 50
)

// Watch follows the channels of one machine. It is fed by one goroutine.
type Watch struct {
	cfg      Config
	ch       []watched
	mains    *mains
	turn     int64 // of the newest frame
	frames   int64
	declared bool
	ref      periods      // of the shaft
	apart    bool         // a channel has the teeth, another one the mark
	frame    *frame.Frame // being scanned
	scanOne  func(i int)
}

// watched is one channel with its past.
type watched struct {
	Channel
	lo, hi float64 // codes of Min and Max, in that order; infinite when not checked
	scan   scan
	slow   slow
	share  float64 // of mains, quick look
	levels Levels
	ep     [faults]episode
	recent [confirmWithin]doubt
	next   int // of recent
	seen   bool
	looks  int64
	rail   [2]float64 // code at which the channel stood in the newest suspect turn, high and low; NaN none
	shifts shifts
}

// New checks the configuration.
func New(cfg Config) (*Watch, error) {
	if cfg.Learn <= 0 {
		cfg.Learn = DefaultLearn
	}
	if cfg.Hold <= 0 {
		cfg.Hold = DefaultHold
	}
	var errs []error
	if !(cfg.Rate > 0) || math.IsInf(cfg.Rate, 0) {
		errs = append(errs, fmt.Errorf("rate %g Hz is not positive", cfg.Rate))
	}
	if cfg.MainsHz != 0 && !(cfg.MainsHz >= 10 && cfg.MainsHz <= 100) {
		errs = append(errs, fmt.Errorf("mains of %g Hz", cfg.MainsHz))
	}
	for _, c := range cfg.Channels {
		switch {
		case c.Input < 0:
			errs = append(errs, fmt.Errorf("channel %q has input %d", c.ID, c.Input))
		case c.Kind == Phase:
		case !(c.PerCount > 0) || !(c.FullV > 0) || c.Gain == 0 || bad(c.FullV) || bad(c.ZeroV) || bad(c.Gain):
			errs = append(errs, fmt.Errorf("channel %q: %g V per code, %g V full scale, zero at %g V, gain %g", c.ID, c.PerCount, c.FullV, c.ZeroV, c.Gain))
		}
	}
	if err := errors.Join(errs...); err != nil {
		return nil, fmt.Errorf("sensor: %w", err)
	}
	m, err := newMains(cfg.Rate, cfg.MainsHz)
	if err != nil {
		return nil, fmt.Errorf("sensor: %w", err)
	}
	w := &Watch{cfg: cfg, mains: m, ch: make([]watched, len(cfg.Channels))}
	w.scanOne = w.scanChannel
	for i, c := range cfg.Channels {
		d := &w.ch[i]
		w.apart = w.apart || c.Teeth
		*d = watched{Channel: c, lo: math.Inf(-1), hi: math.Inf(1), rail: [2]float64{math.NaN(), math.NaN()}}
		if c.Kind != Phase {
			d.slow = newSlow(cfg.Rate)
			if c.Max > c.Min {
				a, b := c.code(c.Min), c.code(c.Max)
				d.lo, d.hi = min(a, b), max(a, b)
			}
		}
	}
	return w, nil
}

func bad(x float64) bool { return math.IsNaN(x) || math.IsInf(x, 0) }

// code is the (fractional) code of an engineering value.
func (c *Channel) code(v float64) float64 { return (v/c.Gain + c.ZeroV) / c.PerCount }

// value is the engineering value of a code.
func (c *Channel) value(code float64) float64 { return (code*c.PerCount - c.ZeroV) * c.Gain }

// Declare says whether a person has declared the machine healthy from now on: what is usual is then learnt anew, and
// goes on being learnt until Declare(false).
func (w *Watch) Declare(healthy bool) {
	if healthy && !w.declared {
		for i := range w.ch {
			w.ch[i].levels = Levels{}
		}
	}
	w.declared = healthy
}

// Frame takes the next revolution. The frame is not held.
func (w *Watch) Frame(f *frame.Frame) {
	w.turn = f.Turn
	w.frames++
	for i := range w.ch {
		c := &w.ch[i]
		if c.Kind == Phase {
			w.marks(c, f)
		}
	}
	if f.Q&frame.Gap == 0 { // lost samples are filled with the code before them: nothing can be said
		w.scanAll(f)
		for i := range w.ch {
			if c := &w.ch[i]; c.scan.n > 0 {
				w.judge(i, f)
			}
		}
	}
	for i := range w.ch {
		for k := range w.ch[i].ep {
			w.ch[i].ep[k].rest(f.Turn, int64(w.cfg.Hold))
		}
	}
}

// least is how many samples a turn needs before it is looked at.
const least = 2 * parts

func (w *Watch) scanAll(f *frame.Frame) {
	w.frame = f
	if w.cfg.Do != nil {
		w.cfg.Do(len(w.ch), w.scanOne)
	} else {
		for i := range w.ch {
			w.scanOne(i)
		}
	}
	w.frame = nil
}

// scanChannel scans one channel of the frame in hand.
func (w *Watch) scanChannel(i int) {
	c, f := &w.ch[i], w.frame
	c.scan.n = 0
	if c.Kind == Phase || c.Input >= len(f.Counts) || len(f.Counts[c.Input]) < least {
		return
	}
	x := f.Counts[c.Input]
	c.scan.take(x)
	c.slow.add(x, f.Seq0)
	c.slow.note(f.Turn, f.Seq0, &c.scan, f.Mark1-f.Mark0)
	c.seen = true
}

// raise books a suspicion of the turn in hand. What lies outside the valid range in one turn is kept out of it where
// the turn is made, sample by sample; it takes more of them to say something of the channel.
func (w *Watch) raise(c *watched, k Fault, f *frame.Frame, why func() string) {
	times, within := 2, int64(confirmWithin)
	if k == Range {
		times, within = rangeTimes, rangeWithin
	} else {
		c.recent[c.next] = doubt{k, f.Seq0, f.Seq0 + int64(c.scan.n)}
		c.next = (c.next + 1) % len(c.recent)
	}
	if c.ep[k].suspect(w.frames, f.Turn, f.Turn, f.Seq0, times, within) {
		c.ep[k].reason = why()
	}
}

// Suspect says why a channel must not be used anywhere in the samples from seq0 up to seq1, or "". It is to be asked
// before the frames that begin at seq1 or later are added to speak of the present.
func (w *Watch) Suspect(channel int, seq0, seq1 int64) string {
	c := &w.ch[channel]
	for k := range Fault(faults) {
		if e := &c.ep[k]; e.standing && k.withdraws(c.Kind) && seq1 > e.seq {
			return "sensor: " + k.String()
		}
	}
	for i := range c.recent {
		if d := &c.recent[i]; d.to > seq0 && d.from < seq1 && d.fault.withdraws(c.Kind) {
			return "sensor: doubtful, " + d.fault.String()
		}
	}
	return ""
}

// State gives the state of a channel, by its index in Config.Channels.
func (w *Watch) State(channel int) State {
	c := &w.ch[channel]
	s := State{Category: FunctionCheck, Reason: "no whole turn has been looked at yet"}
	if c.seen {
		s = State{Category: Good}
	}
	found := false
	for k := range Fault(faults) {
		if e := &c.ep[k]; e.standing && (!found || k.category(c.Kind) > s.Category) {
			found = true
			s = State{Category: k.category(c.Kind), Fault: k, Reason: e.reason, Since: e.since, First: e.seq, Judge: k == Gain || k == Zero}
		}
	}
	return s
}

// Channels is how many channels there are.
func (w *Watch) Channels() int { return len(w.ch) }

// ID names a channel.
func (w *Watch) ID(channel int) string { return w.ch[channel].ID }
