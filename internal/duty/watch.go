package duty

import (
	"math"

	"lapwing/internal/window"
)

// Step is a load step as the throw's traces show it.
type Step struct {
	Code int
	Idle [2]bool // ends whose suction valves are held open
}

// WatchConfig belongs to one throw. Zero values take the defaults.
type WatchConfig struct {
	MinRPM, MaxRPM float64 // stated speed range; 0, 0: any speed
	Steps          []Step
	WarmTurns      int     // turns before anything is called steady; default 10
	StartTurns     int     // turns called Starting after a stop; default 60
	SettleTurns    int     // turns called Changing after a load step; default 30
	DoubtTurns     int     // turns that are not judged because the traces show another load step than is told, before the disagreement is taken for the machine's; default 60
	Delay          float64 // s, by which process values come late at most; default 1.5
	Drift          float64 // relative difference of the last 4 turns from the 16 before that is a change; default 0.01
}

// Input is what one throw's turn says about its duty. NaN: not known.
type Input struct {
	Turn         int64
	Valid        bool // the turn can be measured
	RPM          float64
	ProcessKnown bool // the process values below are fresh
	Step         int
	Ps, Pd       float64 // Pa, line
	OwnPs, OwnPd [2]float64
	Ends         [2]window.State
	OtherStep    bool // the traces make sense only with the clearance of another load step than the one told
}

// Watch classifies the duty of one throw, turn by turn.
type Watch struct {
	cfg     WatchConfig
	turns   int // valid turns since the last stop or gap
	stopped bool
	start   int // turns still to be called Starting
	settle  int // turns still to be called Changing
	step    int
	haveSt  bool
	inf     bool
	idle    [2]bool
	rpm     lead
	ps, pd  lead
	ownPs   lead
	ownPd   lead
	last    int64
	doubt   int // turns in a row in which the ends at work or their clearances were not those of the step told
	taps    taps
}

// NewWatch gives a watch that has seen nothing.
func NewWatch(cfg WatchConfig) *Watch {
	def := func(p *int, v int) {
		if *p <= 0 {
			*p = v
		}
	}
	def(&cfg.WarmTurns, 10)
	def(&cfg.StartTurns, 60)
	def(&cfg.SettleTurns, 30)
	def(&cfg.DoubtTurns, 60)
	if cfg.Delay <= 0 {
		cfg.Delay = 1.5
	}
	if cfg.Drift <= 0 {
		cfg.Drift = 0.01
	}
	return &Watch{cfg: cfg}
}

// Stopped says that the machine makes no turns.
func (w *Watch) Stopped() Point {
	w.stopped, w.turns = true, 0
	nan := math.NaN()
	return Point{State: Stopped, Ps: nan, Pd: nan, OwnPs: nan, OwnPd: nan}
}

// Classify takes one turn. A turn that cannot be measured is Unknown and leaves the watch as it was.
func (w *Watch) Classify(in Input) Point {
	p := Point{RPM: in.RPM, Step: in.Step, Ps: in.Ps, Pd: in.Pd}
	w.noteIdle(in.Ends)
	p.OwnStep = w.inferStep()
	p.OwnPs, p.OwnPd = own(in.OwnPs, in.Ends), own(in.OwnPd, in.Ends)
	if !in.ProcessKnown {
		p.Step = p.OwnStep
	}
	if !in.ProcessKnown || !known(in.Ps) || !known(in.Pd) {
		p.Inferred, p.Ps, p.Pd = true, p.OwnPs, p.OwnPd
	}
	if !in.Valid || !known(in.RPM) {
		return p // Unknown
	}
	if w.turns > 0 && in.Turn-w.last > 200 { // a long hole: what came before says nothing
		w.turns = 0
	}
	w.last = in.Turn
	if w.turns == 0 {
		w.rpm, w.ps, w.pd, w.settle, w.haveSt = lead{}, lead{}, lead{}, 0, false
		w.doubt, w.taps, w.ownPs, w.ownPd = 0, taps{}, lead{}, lead{}
		w.start = w.cfg.WarmTurns
		if w.stopped {
			w.start = w.cfg.StartTurns
		}
		w.stopped = false
	}
	w.turns++

	if w.haveSt && (p.Step != w.step || p.Inferred != w.inf) {
		w.ps, w.pd = lead{}, lead{} // other taps, another level: no drift of the machine
		if p.Step != w.step {
			w.settle = w.cfg.SettleTurns
		}
	}
	w.step, w.inf, w.haveSt = p.Step, p.Inferred, true
	moving := false
	for _, m := range [...]bool{w.ps.move(p.Ps, w.cfg.Drift), w.pd.move(p.Pd, w.cfg.Drift), w.ownPs.move(p.OwnPs, w.cfg.Drift), w.ownPd.move(p.OwnPd, w.cfg.Drift)} {
		moving = moving || m
	}
	late := w.late(in, &p, moving)
	if w.rpm.move(in.RPM, w.cfg.Drift) || moving || late {
		w.settle = max(w.settle, w.cfg.SettleTurns/3)
	}

	out := w.cfg.MaxRPM > 0 && (in.RPM < w.cfg.MinRPM || in.RPM > w.cfg.MaxRPM)
	switch {
	case out && w.start > 0 && in.RPM < w.cfg.MinRPM: // on its way up
		w.start = max(w.start, w.cfg.WarmTurns)
		p.State = Starting
	case out:
		w.settle = w.cfg.SettleTurns
		p.State = OutOfRange
	case w.start > 0:
		w.start--
		p.State = Starting
	case w.idle == [2]bool{true, true}:
		p.State = Unloaded
	case late:
		p.State = Unknown
	case !known(p.Ps) || !known(p.Pd) || p.Ps <= 0 || p.Pd <= 0:
		p.State = Unknown
	case w.settle > 0:
		w.settle--
		p.State = Changing
	default:
		p.State = Steady
	}
	return p
}

// late tells whether the process values are behind what the traces show already: another load step, another pressure.
// Control systems tell of a change up to seconds later, and features held against the old duty would accuse a healthy
// machine. A disagreement that lasts is no delay: it is then judged.
func (w *Watch) late(in Input, p *Point, moving bool) bool {
	far := false
	if !p.Inferred {
		var off [2]float64
		off, far = w.taps.apart(in, int(math.Ceil(w.cfg.Delay*in.RPM/60)), moving)
		p.Ps, p.Pd = p.Ps*math.Exp(off[0]), p.Pd*math.Exp(off[1])
	}
	if !in.ProcessKnown || !in.OtherStep && !w.otherIdle(in) {
		w.doubt = 0
		return far
	}
	w.doubt++
	return far || w.doubt <= w.cfg.DoubtTurns
}

// otherIdle tells whether other ends do work than the load step told says. Steps that are not listed say nothing.
func (w *Watch) otherIdle(in Input) bool {
	for _, s := range w.cfg.Steps {
		if s.Code == in.Step {
			return s.Idle != w.idle
		}
	}
	return false
}

// taps compares the plateaus with the line pressures of the process values: valve losses and taps keep them apart by
// a share that is followed while no pressure moves. While one does, what is beyond the share is the process values'
// delay, and is made good by the plateaus.
type taps struct {
	have  [2]bool
	share [2][2]float64 // by end: ln of plateau over line, suction and discharge
	told  [2]float64    // the line pressures told last
	quiet int           // turns since they moved
	far   int           // turns in a row in which a plateau was too far from them
}

const (
	levelApart  = 0.03      // ln, beyond which the process values are late; valves and taps move slower and less
	levelMost   = 0.4       // ln, beyond which a plateau is not believed, whoever agrees with it
	levelAgree  = 0.015     // ln, within which the two ends have seen the same move
	levelFollow = 1.0 / 8.0 // of the difference, per turn, that the share follows
	levelMoves  = 0.003     // ln, by which a pressure told has moved and not merely been read again
)

// apart gives by how much the line pressures must have moved since they were told, as ln, and whether plateaus and
// pressures are too far apart to be judged by. What stays apart for longer than the delay of pressures that stand still
// is no delay, but the share at another flow.
func (l *taps) apart(in Input, delay int, moving bool) (off [2]float64, far bool) {
	l.quiet++
	if !(math.Abs(math.Log(in.Ps/l.told[0])) <= levelMoves && math.Abs(math.Log(in.Pd/l.told[1])) <= levelMoves) {
		l.told, l.quiet = [2]float64{in.Ps, in.Pd}, 0
	}
	if l.far >= delay && l.quiet >= delay {
		l.have, l.far = [2]bool{}, 0
	}
	var d [2][2]float64
	var n float64
	ahead := false // a plateau is beyond what a share may be off
	for e := range in.Ends {
		now := [2]float64{math.Log(in.OwnPs[e] / in.Ps), math.Log(in.OwnPd[e] / in.Pd)}
		if in.Ends[e] == window.Idle || !known(now[0]) || !known(now[1]) {
			l.have[e] = false
			continue
		}
		if !l.have[e] {
			l.have[e], l.share[e] = true, now
			continue
		}
		d[e] = [2]float64{now[0] - l.share[e][0], now[1] - l.share[e][1]}
		ahead = ahead || beyond(d[e], levelApart)
		far = far || beyond(d[e], levelApart) && !moving || beyond(d[e], levelMost)
		n++
		for k := range off {
			off[k] += (d[e][k] - off[k]) / n
		}
	}
	// Pressures that two gauges saw move alike have moved; what one gauge alone says may be the gauge.
	far = far || ahead && (n < 2 || beyond([2]float64{d[0][0] - d[1][0], d[0][1] - d[1][1]}, levelAgree))
	if far || !moving {
		off = [2]float64{}
	}
	if !moving {
		for e := range d {
			if !beyond(d[e], levelApart) {
				for k := range d[e] {
					l.share[e][k] += levelFollow * d[e][k]
				}
			}
		}
	}
	if far {
		l.far++
	} else {
		l.far = 0
	}
	return off, far
}

// noteIdle keeps the last known pattern of idle ends; a lost window says nothing.
func (w *Watch) noteIdle(ends [2]window.State) {
	for e, s := range ends {
		switch s {
		case window.Idle:
			w.idle[e] = true
		case window.Following, window.Holding, window.NotDelivering:
			w.idle[e] = false
		}
	}
}

// inferStep names the first load step with the pattern of idle ends. Pockets do not show in the pattern, so steps that
// differ by a pocket only are one to it. A pattern that no step has gets a negative code of its own.
func (w *Watch) inferStep() int {
	for _, s := range w.cfg.Steps {
		if s.Idle == w.idle {
			return s.Code
		}
	}
	code := -1
	if w.idle[0] {
		code--
	}
	if w.idle[1] {
		code -= 2
	}
	return code
}

// own takes the plateau of the first end that works and knows it.
func own(p [2]float64, ends [2]window.State) float64 {
	for e, v := range p {
		if known(v) && ends[e] != window.Idle {
			return v
		}
	}
	return math.NaN()
}

func beyond(d [2]float64, limit float64) bool {
	return math.Abs(d[0]) > limit || math.Abs(d[1]) > limit
}

func known(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// lead compares the mean of the newest turns with that of the turns before them: on a ramp their difference is half
// a span's worth of it, and a step is forgotten once it has passed through both.
type lead struct {
	ring [leadSpan]float64
	n    int
}

const (
	leadNew  = 4  // turns of the newer mean
	leadSpan = 20 // turns of both
)

func (l *lead) move(v, limit float64) bool {
	if !known(v) {
		return false
	}
	l.ring[l.n%leadSpan] = v
	l.n++
	have := min(l.n, leadSpan)
	if have <= leadNew {
		return false
	}
	var newer, older float64
	for k := range have {
		x := l.ring[(l.n-1-k)%leadSpan]
		if k < leadNew {
			newer += x
		} else {
			older += x
		}
	}
	newer /= leadNew
	older /= float64(have - leadNew)
	return math.Abs(newer-older) > limit*math.Abs(older)
}
