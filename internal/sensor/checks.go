package sensor

import (
	"math"

	"lapwing/internal/frame"
)

// Thresholds. Healthy and faulty figures beside them are those of TestThresholds on the modelled machine.
const (
	flatFor     = 0.002 // s of one code (reference/vibration.md section 5)
	flatShare   = 0.9   // of a turn: no live signal, whatever its resolution
	railRun     = 4     // samples at an extreme (same source)
	railSame    = 2e-3  // of the peak-to-peak value: the same rail again
	shelfQuiet  = 0.25  // of the least usual noise: what the amplifier cuts off has lost the transmitter's noise
	shelfRun    = 16    // longest usual stretch of one code up to which the converter shows that noise at all
	shelfLeast  = 20    // samples of a part from which its noise can be told
	biasV       = 0.5   // V (same source), but not more than biasShare of full scale
	biasShare   = 0.1
	cableShare  = 0.6 // of the variance in mains lines (same source)
	cableRest   = 0.5 // of the least usual noise of whole turns, which mains do not reach
	cableKurt   = 6.0 // where nothing is learnt yet: no blows of valves
	humShare    = 0.02
	leastLooks  = 3
	humTimes    = 5.0  // usual share (same source)
	humTimesOwn = 4.0  // and usual power: a signal that has shrunk has no hum for that
	humSpan     = 1e-3 // rms, of a pressure's valid range: its hum is a share of next to nothing beside the strokes
	deadRMS     = 0.1  // of the least usual rms …
	deadQuiet   = 0.25 // … and of the least usual noise
	deadOthers  = 20.0 // a pressure is dead only while another one moves so many times more
	noiseTimes  = 6.0  // usual noise
	evenNoise   = 1.5  // noise of the whole turn over that of its quiet parts: a leak or a blow is louder at some angles
	swapRough   = 0.01 // a pressure is smooth, an accelerometer is not
	swapKurt    = 6.0
	swapSmooth  = 0.01 // and the other way round
	swapBelow   = 3e4  // Pa absolute: no cylinder is that empty
	swapTurn    = 0.3  // share of the first harmonic that makes a phase worth having
	swapSwing   = 0.1  // of the valid range, peak to peak
	swapDeg     = 120  // from where an end's pressure should peak
	peakBefore  = 30.0 // degrees before the inner dead centre: middle of the time at high pressure
	strays      = 0.005
	livingRate  = 10000 // Hz, slower sampling shows no difference in roughness
)

// judge looks at one channel's turn.
func (w *Watch) judge(i int, f *frame.Frame) {
	c := &w.ch[i]
	s := &c.scan
	usual := c.levels.N >= w.cfg.Learn
	var found [faults]bool
	raise := func(k Fault) {
		if !found[k] {
			found[k] = true
			w.raise(c, k, f, func() string { return w.say(c, k) })
		}
	}
	w.flat(c, usual, raise)
	if found[Flat] {
		return // all else follows from it
	}
	w.mean(c, raise)
	w.range_(c, f, raise)
	w.rails(c, raise)
	if f.Good() {
		w.swapped(c, f, raise)
	}
	switch {
	case w.open(c, f, usual):
		raise(OpenCable)
	case usual && f.Good() && !found[LostBias] && w.dead(i):
		raise(Dead)
	case usual && s.quiet > noiseTimes*c.levels.Quiet[1] && s.quiet*c.PerCount > 1e-6*c.FullV && (c.Kind == Pressure || s.white < evenNoise*s.quiet):
		raise(Noisy)
	}
	l, looked := w.mains.look(&c.slow)
	looked = looked && !w.hum(c, &l, usual)
	if !f.Good() || f.Q&frame.Clipped != 0 {
		return
	}
	for k := range found {
		if found[k] || c.ep[k].standing && Fault(k) != Gain && Fault(k) != Zero {
			return // what a broken channel shows is not usual
		}
	}
	more := c.levels.N < w.cfg.Learn || w.declared
	if more {
		c.levels.take(s)
	}
	if looked && (more || c.levels.Looks < leastLooks) {
		c.levels.takeLook(&l)
	}
}

// open: an accelerometer's input that hears mains and has lost the valves. The mains are looked for last: of a machine
// that runs well it never comes to that.
func (w *Watch) open(c *watched, f *frame.Frame, usual bool) bool {
	s := &c.scan
	c.share = 0
	if c.Kind != Acceleration || usual && s.white >= cableRest*c.levels.White || !usual && !(f.Good() && s.kurtosis < cableKurt) {
		return false
	}
	c.share, _ = w.mains.quick(&c.slow, s.rms*s.rms)
	return c.share > cableShare
}

// flat: one code for most of a turn; or for two milliseconds where that is far longer than usual. Coarse converters,
// and plateaus of a steady line, repeat codes by themselves.
func (w *Watch) flat(c *watched, usual bool, raise func(Fault)) {
	s := &c.scan
	switch run := float64(s.run); {
	case run >= flatShare*float64(s.n):
		raise(Flat)
	case usual && run >= flatFor*w.cfg.Rate && s.run > 4*c.levels.Run && s.run > max(s.top, s.bottom):
		raise(Flat) // at an extreme it is cut off, see rails
	}
}

// mean: an accelerometer is coupled so that it rests at its zero; a transmitter cannot read less than nothing.
func (w *Watch) mean(c *watched, raise func(Fault)) {
	v := c.scan.mean*c.PerCount - c.ZeroV
	switch {
	case c.Kind == Acceleration && math.Abs(v) > min(biasV, biasShare*c.FullV):
		if w.cfg.Rate >= livingRate && c.scan.rough < swapSmooth && c.scan.first > swapTurn {
			raise(Swapped)
			return
		}
		raise(LostBias)
	case c.Kind == Pressure && v*c.Gain < 0 && math.Abs(v) > 0.02*c.FullV:
		if w.bursts(c) {
			raise(Swapped)
			return
		}
		raise(LostBias)
	}
}

func (w *Watch) range_(c *watched, f *frame.Frame, raise func(Fault)) {
	s := &c.scan
	if float64(s.max) <= c.hi && float64(s.min) >= c.lo {
		return
	}
	out := outside(f.Counts[c.Input], c.lo, c.hi)
	if c.Kind == Acceleration || out > strays { // a peak that is cut off is lost; a pressure's few strays average out
		raise(Range)
	}
}

// rails: several samples at an extreme, and at the same one again. A pressure may stand still at its plateaus, so its
// rail must be the converter's end, or beyond the valid range, or far longer than usual, or without the usual noise.
func (w *Watch) rails(c *watched, raise func(Fault)) {
	s := &c.scan
	least := railRun
	if c.levels.N > 0 {
		least = max(least, 2*c.levels.Rail)
	}
	full := c.FullV / c.PerCount
	at := [2]float64{math.NaN(), math.NaN()}
	for k, code := range [2]float64{float64(s.railHi), float64(s.railLo)} {
		if level, flat := c.shelf(k); flat {
			at[k] = level
			continue
		}
		if [2]int{s.top, s.bottom}[k] < least {
			continue
		}
		if c.Kind == Pressure && math.Abs(code) < 0.98*full && code <= c.hi && code >= c.lo && !w.long([2]int{s.top, s.bottom}[k], c) {
			continue
		}
		at[k] = code
	}
	tolerance := railSame * (float64(s.max) - float64(s.min))
	for k := range at {
		if math.IsNaN(at[k]) {
			continue
		}
		again := math.Abs(at[k]-c.rail[k]) <= tolerance
		if math.IsNaN(c.rail[k]) || again || math.Abs(at[k]) >= 0.98*full {
			raise(Clipped)
		}
		c.rail[k] = at[k]
	}
	if math.IsNaN(at[0]) && math.IsNaN(at[1]) && w.frames-c.ep[Clipped].tick[0] >= confirmWithin {
		c.rail = at
	}
}

// shelf: a pressure stands at its extreme for a sixteenth of a turn, flat, without the noise that it always had: an
// amplifier that saturates below the converter's end, with the converter's own few counts on top.
func (c *watched) shelf(side int) (level float64, flat bool) {
	s := &c.scan
	q := &s.flats[side]
	return q.level, c.Kind == Pressure && c.levels.N > 0 && c.levels.Run <= shelfRun && s.n >= shelfLeast*parts &&
		q.noise < shelfQuiet*c.levels.Quiet[0] && q.reach <= railSame*(float64(s.max)-float64(s.min))
}

func (w *Watch) long(run int, c *watched) bool {
	return c.levels.N >= w.cfg.Learn && float64(run) > flatFor/2*w.cfg.Rate && run > 4*c.levels.Rail
}

// bursts: the signal has the blows of valves in it and rests at no voltage. Pressures are smooth.
func (w *Watch) bursts(c *watched) bool {
	s := &c.scan
	return w.cfg.Rate >= livingRate && s.rough > swapRough && s.kurtosis > swapKurt && s.first < swapTurn && math.Abs(s.mean)*c.PerCount < 0.05*c.FullV
}

// swapped: an accelerometer's signal on a pressure channel, or the pressure of an end that peaks half a turn off.
func (w *Watch) swapped(c *watched, f *frame.Frame, raise func(Fault)) {
	if c.Kind != Pressure {
		return
	}
	s := &c.scan
	if c.value(s.mean) < swapBelow && w.bursts(c) {
		raise(Swapped)
		return
	}
	if math.IsNaN(c.InnerDead) || s.first < swapTurn || math.Abs(w.fromInner(c)) <= swapDeg {
		return
	}
	if float64(s.max)-float64(s.min) >= swapSwing*c.span() {
		raise(Swapped)
	}
}

// span is the valid range in codes, the converter's where none is given.
func (c *watched) span() float64 {
	if s := c.hi - c.lo; !math.IsInf(s, 0) {
		return s
	}
	return 2 * c.FullV / c.PerCount
}

// fromInner is how far from its place an end's pressure peaks, degrees in ±180.
func (w *Watch) fromInner(c *watched) float64 {
	peak := c.scan.peak
	if c.Gain < 0 {
		peak += 180
	}
	return math.Remainder(peak-c.InnerDead+peakBefore, 360)
}

// dead: no trace of the machine. Of a pressure that can only be said while others move.
func (w *Watch) dead(i int) bool {
	c := &w.ch[i]
	s := &c.scan
	if c.Kind == Acceleration {
		return s.rms < deadRMS*c.levels.RMS[0] && s.quiet < deadQuiet*c.levels.Quiet[0]
	}
	if s.rms > 2*s.white {
		return false
	}
	own := s.rms * c.PerCount * math.Abs(c.Gain)
	for k := range w.ch {
		if o := &w.ch[k]; k != i && o.Kind == Pressure && o.scan.n > 0 && o.scan.rms*o.PerCount*math.Abs(o.Gain) > deadOthers*own {
			return true
		}
	}
	return false
}

// hum looks at one spectrum and reports whether it is suspect.
func (w *Watch) hum(c *watched, l *look, usual bool) bool {
	c.looks++
	i := 0
	if l.power[1] > l.power[0] {
		i = 1 // 50 and 60 Hz share the line at 300
	}
	known := usual && c.levels.Looks > 0
	limit := humShare
	switch {
	case c.Kind == Pressure:
		limit = 0
		if math.Sqrt(l.power[i]) < humSpan*c.span() {
			return false
		}
	case !known:
		limit *= humTimes
	}
	if known {
		limit = max(limit, humTimes*c.levels.Share[i])
	}
	if l.share[i] <= limit || known && l.power[i] < humTimesOwn*c.levels.Power[i] {
		return false
	}
	k := Hum
	if l.share[i] > cableShare && c.Kind == Pressure {
		k = OpenCable
	}
	if c.ep[k].suspect(c.looks, l.since.turn, w.turn, l.since.seq, 2, confirmWithin) {
		c.ep[k].reason = w.humSays(c, k, i, l)
	}
	return true
}
