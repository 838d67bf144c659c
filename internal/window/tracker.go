package window

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
)

// Config is what the tracker must know of the machine beforehand.
type Config struct {
	Works [][2]bool // per throw: the ends that do work by design; nil or too short: they all do
}

// Input is what the tracker is told about one throw for one turn.
type Input struct {
	Cylinder       crank.Cylinder // with the pocket of the present load step open
	K              float64        // volume isentropic exponent of the gas; not positive: 1.3 is taken
	LinePs, LinePd float64        // Pa absolute, NaN unknown; not needed to find an event
	IdleHint       [2]bool        // ends whose suction valves the load step holds open
	Late           [2]float64     // degrees after the outer dead centre to which the step holds them open; 0 or NaN none

	// Other clearances that a load step may give each end, as shares of its swept volume. The control system tells of a
	// step up to a second late; one of these is believed instead of the cylinder's when only it makes sense of the trace.
	Others [2][]float64
}

// Tracker follows the windows of one machine. It is not safe for concurrent use.
type Tracker struct {
	cfg    Config
	throws []throw
	out    []Throw
	buf    []float64 // scratch
	deaf   []bool    // scratch
}

type throw struct {
	trace  [2]trace
	other  [2]trace // of a clearance that the load step told does not give
	memory [2]endMemory
	now    [2]sight

	good    bool      // this turn shows something
	foreign []float64 // degrees, where other throws' openings ring
}

// sight is what was seen at one end in this turn, before windows are placed.
type sight struct {
	working bool
	open    [2]float64 // departure as found, by stroke; NaN
	rise    [2]float64 // degrees from there to riseTimes as much departure; NaN
	at      [2]float64 // where the opening is taken to be: found or held; NaN
	close   [2]float64 // closing that begins the stroke, degrees after its dead centre; NaN
	runs    float64    // degrees, where the closed compression begins; NaN
	k       float64
	perMs   float64 // degrees per ms

	heldLate bool // close[Compression] is the last late closing, not this turn's
}

// NewTracker makes a tracker that has learnt nothing yet.
func NewTracker(cfg Config) *Tracker { return &Tracker{cfg: cfg} }

func (t *Tracker) grow(n int) {
	for len(t.throws) < n {
		t.throws = append(t.throws, throw{})
		t.out = append(t.out, Throw{})
	}
}

// Track finds the windows of one turn. duty has one entry per throw, in the turn's order; a missing entry leaves that
// throw without windows. The Result is valid until the next call.
func (t *Tracker) Track(tn *turn.Turn, duty []Input) Result {
	t.grow(len(tn.Throws))
	if len(tn.Throws) == 0 { // an invalid turn may carry nothing
		t.grow(len(duty))
	}
	for i := range t.throws {
		th := &t.throws[i]
		out := &t.out[i]
		var tt *turn.Throw
		if tn.Valid() && i < len(tn.Throws) && i < len(duty) && usable(&tn.Throws[i]) {
			tt = &tn.Throws[i]
		}
		th.good = tt != nil
		for e := range out.Ends {
			var in Input
			if i < len(duty) {
				in = duty[i]
			}
			t.end(th, tt, i, e, in, &out.Ends[e])
		}
		if tt != nil {
			t.learn(th, tt)
		}
	}
	for i := range t.throws { // every throw has been seen: what rings across is known
		th, out := &t.throws[i], &t.out[i]
		var tt *turn.Throw
		if th.good {
			tt = &tn.Throws[i]
			t.around(tn, i)
			t.hear(th, tt)
		}
		for e := range out.Ends {
			t.place(th, tt, e, &out.Ends[e])
		}
		share(out)
	}
	return Result{Throws: t.out}
}

// usable reports whether the angle-domain slices of a throw fit its grid.
func usable(tt *turn.Throw) bool {
	g := tt.Grid
	return g.N > 0 && g.Step > 0 && g.Lo <= -turn.PadDeg+1e-9 && g.At(g.N-1) >= 360+turn.PadDeg-1e-9 && len(tt.Pos) == g.N
}

// end fills everything of an end but its windows' limits.
func (t *Tracker) end(th *throw, tt *turn.Throw, i, e int, in Input, out *End) {
	*out = blank()
	see := &th.now[e]
	nan := math.NaN()
	*see = sight{runs: nan, open: [2]float64{nan, nan}, rise: [2]float64{nan, nan}, at: [2]float64{nan, nan}, close: [2]float64{nan, nan}, k: in.K}
	if !(see.k > 1) {
		see.k = 1.3
	}
	if tt != nil {
		see.perMs = 6 * tt.RPM / 1000
	}
	switch {
	case i < len(t.cfg.Works) && !t.cfg.Works[i][e]:
		out.NotPresent = true
		out.set(Idle, whyNotWorking)
		return
	case tt == nil:
		t.hold(th, e, out, whyInvalid)
		return
	case tt.P[e] == nil:
		out.NotPresent = true
		if in.IdleHint[e] {
			out.set(Idle, whyIdleHint)
		} else {
			out.set(Lost, whyNoChannel)
		}
		return
	}
	if why := tt.Bad[e]; why != "" { // a pressure that is not believed moves no window
		t.hold(th, e, out, why)
		return
	}
	tr := &th.trace[e]
	tr.shape(e, in.Cylinder, tt.Grid)
	if !tr.load(tt.P[e]) {
		t.hold(th, e, out, whyPressure)
		return
	}
	t.look(th, tt, e, in, out)
}

// blank is an end about which nothing is known.
func blank() End {
	nan := math.NaN()
	w := Window{Angle: nan, Thermo: nan, Expected: nan, Lo: nan, Hi: nan}
	r := Run{Slope: nan, Sigma: nan}
	return End{W: [Events]Window{w, w, w, w}, Closed: [2]Run{r, r}, Ps: nan, Pd: nan, Trapped: [2]float64{nan, nan}, Clearance: nan}
}

func (e *End) set(s State, why string) {
	e.State = s
	for k := range e.W {
		e.W[k].State, e.W[k].Why = s, why
	}
}

// opens tells which event ends a closed stroke, closes which one begins it.
func opens(stroke int) Event {
	if stroke == Compression {
		return DischargeOpens
	}
	return SuctionOpens
}

func closes(stroke int) Event {
	if stroke == Compression {
		return SuctionCloses
	}
	return DischargeCloses
}

// look reads a good trace, and believes it or not.
func (t *Tracker) look(th *throw, tt *turn.Throw, e int, in Input, out *End) {
	see, mem := &th.now[e], &th.memory[e]
	r := t.read(&th.trace[e], e, see.k)
	if r.idle != "" {
		why := r.idle
		if why == whyIdle && in.IdleHint[e] {
			why = whyIdleHint
		}
		out.Ps, out.Pd = r.ps[Compression], r.pd[Compression]
		t.idle(th, e, out, why)
		return
	}
	see.working, mem.idle = true, false
	if _, ok := t.misfit(mem, &r); !ok {
		r, out.Clearance = t.otherwise(th, tt, e, in, r)
	}
	see.open, see.rise, see.close = r.open, r.rise, r.close
	out.Ps, out.Pd, out.Closed, out.Trapped, out.State = r.ps[Compression], r.pd[Compression], r.closed, r.trapped, Following
	if c := out.Closed[Compression]; c.OK {
		see.runs = tt.Grid.At(c.I0)
	}
	idling := false
	for s := range out.Closed {
		o, c := &out.W[opens(s)], &out.W[closes(s)]
		o.Thermo, o.Expected, c.Thermo = r.thermo[s], r.expected[s], r.meets[s]
		if s == Compression && out.Closed[s].OK && math.IsNaN(see.open[s]) {
			mem.open[s].missed, mem.open[s].rejected.v = 0, mem.open[s].rejected.v[:0]
			o.State, o.Why = NotDelivering, whyNoDelivery
			out.W[DischargeCloses].State, out.W[DischargeCloses].Why = NotDelivering, whyNoDelivery
			out.State, idling = NotDelivering, true
			continue
		}
		t.believe(&mem.open[s], see, s, o, out)
	}
	if idling {
		// What does not deliver may not draw in either: a missing suction opening is then no miss.
		if o := &out.W[SuctionOpens]; math.IsNaN(see.open[Expansion]) {
			mem.open[Expansion].missed = 0
			o.State, o.Why, out.State = NotDelivering, whyNoDelivery, NotDelivering
		}
	}
	for s := range out.Closed {
		t.closingOf(mem, see, s, e, in, out)
	}
}

// otherwise tries the clearances of the other load steps on a trace that the one told makes no sense of. It gives what
// the best of them reads, with its clearance, or the reading it was given and NaN.
func (t *Tracker) otherwise(th *throw, tt *turn.Throw, e int, in Input, told reading) (reading, float64) {
	best, clear, least := told, math.NaN(), math.Inf(1)
	for _, c := range in.Others[e] {
		if c == in.Cylinder.Clearance[e] {
			continue
		}
		cyl := in.Cylinder
		cyl.Clearance[e] = c
		tr := &th.other[e]
		tr.shape(e, cyl, tt.Grid)
		tr.load(tt.P[e]) // the same trace as was good for the one told
		r := t.read(tr, e, th.now[e].k)
		if m, ok := t.misfit(&th.memory[e], &r); ok && m < least {
			best, clear, least = r, c, m
		}
	}
	return best, clear
}

// believe judges an opening against its prediction and keeps, holds or loses it.
func (t *Tracker) believe(o *opener, see *sight, s int, w *Window, out *End) {
	found, dev := see.open[s], see.open[s]-w.Expected
	offset, limit := t.usual(o)
	alone := !math.IsNaN(found) && math.IsNaN(dev)
	if alone { // no prediction to judge by: only what agrees with the last one found may pass, and not for sure
		dev = math.Inf(1)
		if o.seen && math.Abs(found-o.last) <= limit {
			dev = offset
		}
	}
	why := whyNoRun
	if out.Closed[s].OK {
		why = whyNoOpening
	}
	if !math.IsNaN(found) {
		ok := math.Abs(dev-offset) <= limit
		if !ok && !alone {
			o.rejected.push(dev, reseedTurns)
			if ok = o.agree(); ok {
				o.offset.v = append(o.offset.v[:0], o.rejected.v...)
			}
		}
		if ok {
			if !alone {
				o.offset.push(dev, offsetTurns)
			}
			o.rejected.v = o.rejected.v[:0]
			o.missed, o.seen, o.last = 0, true, found
			see.at[s] = found
			w.Angle = found - see.behind(s)
			w.State, w.Why = Following, whyFound
			w.Conf = 0.95 - 0.4*math.Abs(dev-offset)/plausibleFirst
			if len(o.offset.v) < firstTurns {
				w.Conf *= 0.8
			}
			if alone {
				w.Conf = 0.3
			}
			return
		}
		why = whyImplausible
	}
	o.missed++
	switch {
	case !o.seen:
		w.State, w.Why = Lost, whyNeverFound
	case o.missed > holdTurns:
		o.offset.v = o.offset.v[:0] // begin anew when it comes back
		w.State, w.Why = Lost, whyLost
	default:
		see.at[s] = o.last
		if !math.IsNaN(w.Expected) {
			see.at[s] = w.Expected + offset
		}
		w.State, w.Why = Holding, why
		w.Conf = 0.3 * (1 - float64(o.missed-1)/holdTurns)
	}
	out.State = worse(out.State, w.State)
}

// behind is how far the departure found lies after the lift.
func (see *sight) behind(s int) float64 {
	share, deg, ms, plain := riseD, riseDDeg, riseDMs, liftDischargeMs
	if s == Expansion {
		share, deg, ms, plain = riseS, riseSDeg, riseSMs, liftSuctionMs
	}
	if math.IsNaN(see.rise[s]) {
		return plain * see.perMs
	}
	return share*see.rise[s] - deg - ms*see.perMs
}

// agree reports whether the rejected openings agree among themselves: then the prediction is wrong.
func (o *opener) agree() bool {
	if len(o.rejected.v) < reseedTurns {
		return false
	}
	lo, hi := o.rejected.v[0], o.rejected.v[0]
	for _, v := range o.rejected.v {
		lo, hi = min(lo, v), max(hi, v)
	}
	return hi-lo <= reseedWithin
}

// worse keeps the state that says less: Lost before NotDelivering before Holding before Following.
func worse(a, b State) State {
	rank := [...]int{Lost: 0, NotDelivering: 1, Holding: 2, Following: 3, Idle: 4}
	if rank[b] < rank[a] {
		return b
	}
	return a
}

// closingOf judges the closing that begins a stroke.
func (t *Tracker) closingOf(mem *endMemory, see *sight, s, e int, in Input, out *End) {
	w := &out.W[closes(s)]
	start := strokeStart(e, s)
	latest := latestDischarg
	if s == Compression {
		latest = latestSuction
	}
	if c := see.close[s]; !(c < latest) {
		see.close[s] = math.NaN()
	}
	c := see.close[s]
	if s == Compression {
		hint := in.Late[e]
		switch {
		case c > lateClosing:
			mem.late, mem.missed = c, 0
		case !math.IsNaN(c) && c < lateClosing:
			mem.late, mem.missed = 0, 0
		case hint > lateClosing:
			mem.late, mem.missed = hint, 0
		default:
			mem.missed++
		}
		if mem.missed > holdTurns {
			mem.late = 0
		}
	}
	if w.State == NotDelivering {
		return
	}
	w.State = Following
	switch {
	case math.IsNaN(c) && s == Compression && mem.late > 0:
		see.close[s], see.heldLate = mem.late, true
		w.State, w.Conf, w.Why = Holding, 0.2, whyHeldLate
	case math.IsNaN(c):
		w.Conf, w.Why = 0.2, whyNoClosing
	case s == Expansion:
		w.Angle, w.Conf, w.Why = start+c, 0.6, whyClosing
	case c > lateClosing:
		w.Angle, w.Conf, w.Why = start+c, 0.7, whyLate
	case mem.heard[0].count() >= heardLeast:
		w.Angle, w.Conf, w.Why = start+c, 0.4, whyHeard
	default:
		w.Angle, w.Conf, w.Why = start+c, 0.3, whyDeadCentre
	}
}

// idle marks an end that does no work; what was learnt is kept for when it works again.
func (t *Tracker) idle(th *throw, e int, out *End, why string) {
	out.set(Idle, why)
	out.Closed = blank().Closed
	th.memory[e].idle = true
	for s := range th.memory[e].open {
		o := &th.memory[e].open[s]
		o.missed, o.rejected.v = 0, o.rejected.v[:0]
	}
}

// hold keeps the windows where they were on a turn that shows nothing.
func (t *Tracker) hold(th *throw, e int, out *End, why string) {
	mem, see := &th.memory[e], &th.now[e]
	if mem.idle { // it was doing no work, and one turn tells nothing new
		out.set(Idle, why)
		return
	}
	out.State = Holding
	for s := range mem.open {
		o := &mem.open[s]
		w, c := &out.W[opens(s)], &out.W[closes(s)]
		o.missed++
		if !o.seen || o.missed > holdTurns {
			w.State, w.Why = Lost, whyLost
			if !o.seen {
				w.Why = whyNeverFound
			}
			c.State, c.Why = w.State, w.Why
			out.State = Lost
			continue
		}
		see.at[s] = o.last
		w.State, w.Why, w.Conf = Holding, why, 0.2
		c.State, c.Why, c.Conf = Holding, why, 0.2
		if s == Compression && mem.late > 0 {
			see.close[s] = mem.late
		}
	}
}
