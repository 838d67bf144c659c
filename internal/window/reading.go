package window

import (
	"math"

	"lapwing/internal/dsp"
)

// reading is what a trace shows when it is taken with one clearance. By stroke; NaN where nothing was found.
type reading struct {
	idle          string     // why the end does no work; then nothing below is filled but the plateaus
	ps, pd        [2]float64 // Pa, suction and discharge plateau beside the stroke
	closed        [2]Run
	open          [2]float64 // degrees, the lasting departure that ends the stroke
	rise          [2]float64 // degrees from there to riseTimes as much departure
	close         [2]float64 // degrees after its dead centre, the closing that begins it
	thermo, meets [2]float64 // degrees, the line extended to the plateau it ends in, and to that which it starts from
	trapped       [2]float64 // m³
	expected      [2]float64 // degrees, the opening of a sealed end
}

// read finds plateaus, strokes and events.
func (t *Tracker) read(tr *trace, e int, k float64) reading {
	nan := [2]float64{math.NaN(), math.NaN()}
	r := reading{open: nan, rise: nan, close: nan, thermo: nan, meets: nan, trapped: nan, expected: nan}
	comp, exp := strokeStart(e, Compression), strokeStart(e, Expansion)
	// The plateau each stroke starts from and the one it ends in.
	r.ps = [2]float64{t.plateau(tr, comp-180+suctionLo, comp-3), t.plateau(tr, exp+suctionLo, exp+plateauEnd)}
	r.pd = [2]float64{t.plateau(tr, comp+dischargLo, comp+plateauEnd), t.plateau(tr, exp-180+dischargLo, exp-3)}
	ratio := math.Log(r.pd[Compression] / r.ps[Compression])
	short := [2]bool{}
	for s := range r.closed {
		r.closed[s] = tr.run(s, k)
		drop := tr.drop(r.closed[s])
		short[s] = drop < idleStroke*ratio
		// Pulsation may bring the plateaus together; what compresses and expands all the same works.
		if ratio < idleRatio && drop < idleDrop {
			r.idle = whyIdle
		}
	}
	if r.idle != "" {
		r.closed = [2]Run{}
		return r
	}
	if short[Compression] && short[Expansion] && ratio < idleShort {
		r.idle = whyShortStroke
		return r
	}
	var last, first [2]dsp.Line
	for s := range r.closed {
		if short[s] {
			r.closed[s].OK = false
			continue
		}
		var from, before int
		last[s], from = tr.lastLine(r.closed[s])
		first[s], before = tr.firstLine(r.closed[s])
		r.open[s], r.rise[s] = tr.opening(s, last[s], from)
		near := first[s]
		if s == Compression {
			near = tr.nearLine(r.closed[s])
		}
		r.close[s] = tr.closing(s, near, before) - strokeStart(e, s)
	}
	// A plateau must not contain its own opening (pocket, high ratio).
	if d := r.open[Expansion] - exp + 6; d > suctionLo {
		lo := math.Min(d, plateauEnd-3)
		r.ps = [2]float64{t.plateau(tr, comp-180+lo, comp-3), t.plateau(tr, exp+lo, exp+plateauEnd)}
	}
	if d := r.open[Compression] - comp + 4; d > dischargLo {
		lo := math.Min(d, plateauEnd-3)
		r.pd = [2]float64{t.plateau(tr, comp+lo, comp+plateauEnd), t.plateau(tr, exp-180+lo, exp-3)}
	}
	for s := range r.closed {
		if !r.closed[s].OK {
			continue
		}
		start, end := r.ps[s], r.pd[s]
		if s == Expansion {
			start, end = end, start
		}
		r.trapped[s] = tr.trapped(meet(first[s], start), s)
		r.thermo[s] = tr.angleOf(meet(last[s], end), s)
		r.expected[s] = tr.angleOf(r.trapped[s]*math.Pow(start/end, 1/k), s)
		if math.IsNaN(r.expected[s]) { // the plateau is not what the stroke starts from: pulsation, late closing
			i := r.closed[s].I0
			r.expected[s] = tr.angleOf(math.Exp(tr.lnV[i]+(first[s].At(tr.lnV[i])-math.Log(end))/k), s)
		}
		r.meets[s] = tr.angleOf(meet(first[s], start), s)
	}
	return r
}

// misfit is how far both openings lie from where they usually do for their prediction, degrees together; not ok when
// one was not found, cannot be predicted, or is not plausible.
func (t *Tracker) misfit(mem *endMemory, r *reading) (sum float64, ok bool) {
	for s := range r.closed {
		offset, limit := t.usual(&mem.open[s])
		d := math.Abs(r.open[s] - r.expected[s] - offset)
		if !r.closed[s].OK || !(d <= limit) {
			return 0, false
		}
		sum += d
	}
	return sum, true
}

// usual gives an opening's usual offset from its prediction, and how far from it is still plausible.
func (t *Tracker) usual(o *opener) (offset, limit float64) {
	offset, _ = o.offset.centre(t.buf)
	if math.IsNaN(offset) {
		offset = 0
	}
	if len(o.offset.v) < firstTurns {
		return offset, plausibleFirst
	}
	return offset, plausible
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
