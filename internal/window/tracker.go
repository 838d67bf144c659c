package window

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
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
}

// Tracker follows the windows of one machine. It is not safe for concurrent use.
type Tracker struct {
	cfg    Config
	throws []throw
	out    []Throw
	buf    []float64 // scratch
}

type throw struct {
	trace  [2]trace
	memory [2]endMemory
	now    [2]sight
}

// sight is what was seen at one end in this turn, before windows are placed.
type sight struct {
	working bool
	open    [2]float64 // departure as found, by stroke; NaN
	at      [2]float64 // where the opening is taken to be: found or held; NaN
	close   [2]float64 // closing that begins the stroke, degrees after its dead centre; NaN
	k       float64
	perMs   float64 // degrees per ms
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
	*see = sight{open: [2]float64{nan, nan}, at: [2]float64{nan, nan}, close: [2]float64{nan, nan}, k: in.K}
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
	tr := &th.trace[e]
	tr.shape(e, in.Cylinder, tt.Grid)
	if !tr.load(tt.P[e]) {
		t.hold(th, e, out, whyPressure)
		return
	}
	t.look(th, e, in, out)
}

// blank is an end about which nothing is known.
func blank() End {
	nan := math.NaN()
	w := Window{Angle: nan, Thermo: nan, Expected: nan, Lo: nan, Hi: nan}
	r := Run{Slope: nan, Sigma: nan}
	return End{W: [Events]Window{w, w, w, w}, Closed: [2]Run{r, r}, Ps: nan, Pd: nan, Trapped: [2]float64{nan, nan}}
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

// look finds plateaus, strokes and events on a good trace, and believes them or not.
func (t *Tracker) look(th *throw, e int, in Input, out *End) {
	tr, see, mem := &th.trace[e], &th.now[e], &th.memory[e]
	comp, exp := strokeStart(e, Compression), strokeStart(e, Expansion)
	// Suction and discharge plateau beside each stroke: the one it starts from and the one it ends in.
	ps := [2]float64{t.plateau(tr, comp-180+suctionLo, comp-3), t.plateau(tr, exp+suctionLo, exp+plateauEnd)}
	pd := [2]float64{t.plateau(tr, comp+dischargLo, comp+plateauEnd), t.plateau(tr, exp-180+dischargLo, exp-3)}
	out.Ps, out.Pd = ps[Compression], pd[Compression]
	ratio := math.Log(pd[Compression] / ps[Compression])
	if ratio < idleRatio {
		why := whyIdle
		if in.IdleHint[e] {
			why = whyIdleHint
		}
		t.idle(th, e, out, why)
		return
	}
	for s := range out.Closed {
		out.Closed[s] = tr.run(s, see.k)
	}
	short := [2]bool{}
	for s := range short {
		short[s] = tr.drop(out.Closed[s]) < idleStroke*ratio
	}
	if short[Compression] && short[Expansion] && ratio < idleShort {
		t.idle(th, e, out, whyShortStroke)
		return
	}
	see.working, mem.idle = true, false

	var last, first [2]dsp.Line
	for s := range out.Closed {
		if short[s] {
			out.Closed[s].OK = false
			continue
		}
		var from, before int
		last[s], from = tr.lastLine(out.Closed[s])
		first[s], before = tr.firstLine(out.Closed[s])
		see.open[s] = tr.opening(s, last[s], from)
		see.close[s] = tr.closing(s, first[s], before) - strokeStart(e, s)
	}
	// A plateau must not contain its own opening (pocket, high ratio).
	if d := see.open[Expansion] - exp + 6; d > suctionLo {
		lo := math.Min(d, plateauEnd-3)
		ps = [2]float64{t.plateau(tr, comp-180+lo, comp-3), t.plateau(tr, exp+lo, exp+plateauEnd)}
	}
	if d := see.open[Compression] - comp + 4; d > dischargLo {
		lo := math.Min(d, plateauEnd-3)
		pd = [2]float64{t.plateau(tr, comp+lo, comp+plateauEnd), t.plateau(tr, exp-180+lo, exp-3)}
	}
	out.Ps, out.Pd = ps[Compression], pd[Compression]
	out.State = Following

	for s := range out.Closed {
		start, end := ps[s], pd[s]
		if s == Expansion {
			start, end = pd[s], ps[s]
		}
		o, c := &out.W[opens(s)], &out.W[closes(s)]
		if out.Closed[s].OK {
			out.Trapped[s] = tr.trapped(meet(first[s], start), s)
			o.Thermo = tr.angleOf(meet(last[s], end), s)
			o.Expected = tr.angleOf(out.Trapped[s]*math.Pow(start/end, 1/see.k), s)
			c.Thermo = tr.angleOf(meet(first[s], start), s)
		}
		if s == Compression && out.Closed[s].OK && math.IsNaN(see.open[s]) {
			mem.open[s].missed, mem.open[s].rejected.v = 0, mem.open[s].rejected.v[:0]
			o.State, o.Why = NotDelivering, whyNoDelivery
			out.W[DischargeCloses].State, out.W[DischargeCloses].Why = NotDelivering, whyNoDelivery
			out.State = NotDelivering
			continue
		}
		t.believe(&mem.open[s], see, s, o, out)
	}
	if out.State == NotDelivering {
		// What does not deliver may not draw in either: a missing suction opening is then no miss.
		if o := &out.W[SuctionOpens]; math.IsNaN(see.open[Expansion]) {
			mem.open[Expansion].missed = 0
			o.State, o.Why = NotDelivering, whyNoDelivery
		}
	}
	for s := range out.Closed {
		t.closingOf(mem, see, s, e, in, out)
	}
}

// trapped bounds the volume at a closing: a little beyond the dead centres is real (the line pressure pulsates), far
// beyond is a line that was none.
func (tr *trace) trapped(v float64, stroke int) float64 {
	clear := tr.cyl.ClearanceVolume(tr.end)
	if stroke == Expansion && v < 0.8*clear || v < clear/2 || v > 1.15*(clear+tr.cyl.Swept(tr.end)) {
		return math.NaN()
	}
	return v
}

// plateau is the median pressure between two angles, Pa.
func (t *Tracker) plateau(tr *trace, lo, hi float64) float64 {
	w := append(t.buf[:0], tr.lnP[tr.index(lo):tr.index(hi)+1]...)
	t.buf = w
	return math.Exp(dsp.MedianInPlace(w))
}

// believe judges an opening against its prediction and keeps, holds or loses it.
func (t *Tracker) believe(o *opener, see *sight, s int, w *Window, out *End) {
	found, dev := see.open[s], see.open[s]-w.Expected
	offset, _ := o.offset.centre(t.buf)
	if math.IsNaN(offset) {
		offset = 0
	}
	if !math.IsNaN(found) && math.IsNaN(dev) {
		dev = offset // no prediction to judge by: believe the trace
	}
	limit := plausible
	if len(o.offset.v) < firstTurns {
		limit = plausibleFirst
	}
	why := whyNoRun
	if out.Closed[s].OK {
		why = whyNoOpening
	}
	if !math.IsNaN(found) {
		ok := math.Abs(dev-offset) <= limit
		if !ok {
			o.rejected.push(dev, reseedTurns)
			if ok = o.agree(); ok {
				o.offset.v = append(o.offset.v[:0], o.rejected.v...)
			}
		}
		if ok {
			o.offset.push(dev, offsetTurns)
			o.rejected.v = o.rejected.v[:0]
			o.missed, o.seen, o.last = 0, true, found
			see.at[s] = found
			w.Angle = found - see.perMs*[2]float64{liftDischargeMs, liftSuctionMs}[s]
			w.State, w.Why = Following, whyFound
			w.Conf = 0.95 - 0.4*math.Abs(dev-offset)/plausibleFirst
			if len(o.offset.v) < firstTurns {
				w.Conf *= 0.8
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
		see.close[s] = mem.late
		w.State, w.Conf, w.Why = Holding, 0.2, whyHeldLate
	case math.IsNaN(c):
		w.Conf, w.Why = 0.2, whyNoClosing
	case s == Expansion:
		w.Angle, w.Conf, w.Why = start+c, 0.6, whyClosing
	case c > lateClosing:
		w.Angle, w.Conf, w.Why = start+c, 0.7, whyLate
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
