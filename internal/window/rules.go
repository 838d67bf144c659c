package window

// The constants of the estimators. They were tuned on eight model machines (ratio 1.25–5, 300–1500 rpm, pulsation to
// 4 %) and tried on sixteen others; each was found on a 0.2° grid and is applied in degrees, whatever the grid.
const (
	slopeSigma = 0.8  // degrees, Gaussian width of the local slope
	slopeLow   = 0.72 // of k: the band in which a stroke counts as closed
	slopeHigh  = 1.38
	trimStart  = 1.0 // degrees cut off both ends of a closed run: the smoothing reaches beyond them
	trimEnd    = 0.6

	fitShare  = 0.45 // of the run, for the line behind an opening or a closing
	fitLeast  = 9.0  // degrees, but at least this
	nearShare = 0.2  // of the run, for the line that a suction closing is walked back along
	nearLeast = 12.0
	fitMargin = 0.8 // degrees left out next to the opening

	openResidual  = 0.004 // least ln p residual that counts as a departure
	closeResidual = 0.003
	sigmas        = 5.0 // and at least this many times the scatter about the line
	openLasting   = 0.6 // degrees a departure must last
	closeLasting  = 1.0
	closeMean     = 2.0 // degrees averaged for a suction closing

	// A departure is seen after the valve has lifted to 10 %, and the later the slower the pressure goes with the volume.
	// How fast it grows tells: the lift lies before the departure by a share of the rise, the angle from there to
	// riseTimes as much departure, less a constant and a time. Fitted by least absolute error to the model's lift on
	// 240 cases of the grid; without a rise, the medians of windows.md section 2 at 750 rpm.
	riseTimes = 4.0
	riseReach = 15.0 // degrees
	riseS     = 0.70
	riseD     = 0.89
	riseSDeg  = 0.40
	riseDDeg  = 0.27
	riseSMs   = -0.030
	riseDMs   = -0.014

	liftSuctionMs   = 0.07
	liftDischargeMs = 0.13

	idleRatio   = 0.10  // ln(pd/ps) below which the end does no work
	idleDrop    = 0.05  // and ln p over a closed stroke below which it does not either
	idleStroke  = 0.45  // share of ln(pd/ps) that a working end's closed stroke covers at least
	idleShort   = 0.35  // ln(pd/ps) below which an end without closed strokes is idle and not merely misread
	latestOpen  = 166.0 // degrees into the stroke: what is left of it then is under 2 % of the swept volume, and heat and blow-by bend an end away from its line there that never opens
	latestOpenS = 178.0

	plateauEnd = 177.0 // degrees into the stroke: where plateaus end, clear of the closing
	suctionLo  = 154.0 // where they begin
	dischargLo = 160.0

	plausible      = 8.0 // degrees, departure from the prediction less its median
	plausibleFirst = 12.0
	firstTurns     = 5
	offsetTurns    = 15
	reseedTurns    = 5   // rejected openings in a row …
	reseedWithin   = 3.0 // … that agree within this: the prediction is wrong, not they
	holdTurns      = 10  // turns without a believable event before a window is lost

	lagTurns   = 40  // memory of the impact lag
	lagLeast   = 12  // turns before it is used
	lead       = 2.2 // degrees ahead of the departure; never narrowed: peaks may lag the impact, not the window
	searchDeg  = 14.0
	searchMs   = 0.3
	afterPeak  = 1.0 // degrees after the learnt lag
	ringMs     = 0.5 // ms of ring-up added to every tail that is not learnt from the ringing itself
	burstRatio = 4.0 // peak over the background before the window, for a burst to be learnt from
	backDeg    = 7.5 // degrees of background

	heardFrom     = -28.0 // degrees after the dead centre: where a suction closing's impact is listened for …
	heardTo       = 42.0
	heardRun      = 2.0 // degrees into the closed stroke, and ms, to where it may ring
	heardRunMs    = 1.0
	heardTurns    = 20    // memory
	heardLeast    = 8     // turns before it is used
	heardShare    = 0.4   // of the loudest: the last burst as loud as this is the closing; what flutters before and bounces after is not
	heardSpare    = 3.0   // degrees of the window on either side of it
	heardApart    = 1.0   // ms between two bursts
	heardRise     = 1.5   // times what was heard three to one of these before it
	heardEarly    = 0.25  // the window holds what comes after this share of the loudest bursts and …
	heardLate     = 0.75  // … before this share of the last ones
	heardLess     = 2.0   // degrees by which its tail is shorter once they are known
	earliestHeard = -20.0 // degrees after the dead centre; what is heard before that may be flutter, and no window reaches there
	hushed        = 3.0   // degrees before the other end's discharge closing, from where its burst may be …
	hushedDeg     = 5.0   // … to this much after it
	hushedMs      = 1.0
	heardOfTop    = 0.03 // of the turn's loudest: the least that is a closing of this throw

	afterOpening   = 4.0 // degrees after an opening's departure, and ms, in which it may ring
	afterOpeningMs = 3.0
	foreignMs      = 1.5 // more for what comes from another throw

	lateClosing    = 20.0 // degrees after the dead centre: from there the window follows the closing itself
	earliestClose  = -30.0
	latestSuction  = 135.0
	latestDischarg = 45.0
)

// strokeStart gives the angle of the dead centre at which an end's stroke begins on the padded grid. The head end
// expands from 0° and compresses from 180°, the crank end the other way round; all eight windows then lie inside
// the padded grid.
func strokeStart(end, stroke int) float64 {
	if (stroke == Compression) == (end == 0) {
		return 180
	}
	return 0
}

// Reasons given in Window.Why.
const (
	whyFound       = "follows the pressure"
	whyLate        = "follows the late closing"
	whyDeadCentre  = "anchored at the dead centre; the pressure shows the closing poorly at full load"
	whyClosing     = "anchored at the dead centre and the closing found"
	whyHeard       = "anchored at the dead centre, and reaching to where the closing is heard"
	whyNoClosing   = "anchored at the dead centre; no closing found"
	whyHeldLate    = "closing not found; held at the last late closing"
	whyNoOpening   = "no departure from the closed line found; held at the predicted angle"
	whyNoRun       = "no closed stroke found; held at the predicted angle"
	whyImplausible = "departure found too far from the predicted angle; held there"
	whyInvalid     = "turn not valid; held at the last angle"
	whyPressure    = "pressure is not a positive number; held at the last angle"
	whyLost        = "no believable event for too many turns"
	whyNeverFound  = "no believable event yet"
	whyIdle        = "no pressure ratio in this end: it does no work"
	whyIdleHint    = "this load step holds the suction valves open"
	whyShortStroke = "no closed stroke: this end does no work"
	whyNoDelivery  = "the end compresses but its discharge valves do not open"
	whyNotWorking  = "this end does no work by design"
	whyNoChannel   = "this end has no pressure channel"
)
