package window

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
	"lapwing/internal/turn"
)

// trace holds one end's ln V over the grid, computed anew only when cylinder or grid change, and this turn's ln p.
type trace struct {
	cyl  crank.Cylinder
	grid turn.Grid
	end  int

	lnV    []float64
	dlnV   []float64 // smoothed derivative of ln V, same scale as that of ln p
	kernel []float64 // odd half of the smoothing derivative: weight of (x[i+j] − x[i−j]), j = 1…
	lnP    []float64
}

// shape makes ln V fit the cylinder and the grid.
func (tr *trace) shape(end int, cyl crank.Cylinder, g turn.Grid) {
	if tr.cyl == cyl && tr.grid == g && tr.end == end && tr.lnV != nil {
		return
	}
	tr.cyl, tr.grid, tr.end = cyl, g, end
	tr.lnV = cyl.Volumes(tr.lnV, end, g.Lo, g.Step, g.N)
	for i, v := range tr.lnV {
		tr.lnV[i] = math.Log(v)
	}
	sigma := slopeSigma / g.Step
	tr.kernel = tr.kernel[:0]
	for j := 1; float64(j) <= 3.2*sigma || j == 1; j++ {
		x := float64(j) / sigma
		tr.kernel = append(tr.kernel, float64(j)*math.Exp(-x*x/2))
	}
	tr.dlnV = sized(tr.dlnV, g.N)
	tr.lnP = sized(tr.lnP, g.N)
	for i := range tr.dlnV {
		tr.dlnV[i] = tr.derivative(tr.lnV, i)
	}
}

// load takes this turn's pressure; false when it is not positive everywhere.
func (tr *trace) load(p []float64) bool {
	if len(p) != tr.grid.N {
		return false
	}
	for _, v := range p {
		if !(v > 0) || math.IsInf(v, 1) {
			return false
		}
	}
	dsp.Logs(tr.lnP, p)
	return true
}

// derivative is the Gaussian-weighted slope of x at point i, in arbitrary but constant units; 0 at the grid's rim.
func (tr *trace) derivative(x []float64, i int) float64 {
	h := len(tr.kernel)
	if i < h || i >= len(x)-h {
		return 0
	}
	d := 0.0
	for j, w := range tr.kernel {
		d += w * (x[i+j+1] - x[i-j-1])
	}
	return d
}

// points gives the number of grid steps in deg, at least 1.
func (tr *trace) points(deg float64) int { return max(1, int(math.Round(deg/tr.grid.Step))) }

// index is the grid point nearest to an angle, kept inside the grid.
func (tr *trace) index(deg float64) int {
	return min(max(int(math.Round(tr.grid.Index(deg))), 0), tr.grid.N-1)
}

// run finds the closed run of a stroke: of the stretches whose local slope is that of a shut cylinder, the one with
// the largest change of ln p.
func (tr *trace) run(stroke int, k float64) Run {
	start := strokeStart(tr.end, stroke)
	lo, hi := tr.index(start+0.5), tr.index(start+179.5)
	sense := 1.0 // the sign of d ln V
	if stroke == Compression {
		sense = -1
	}
	var best Run
	top, from := 0.0, -1
	for i := lo; i <= hi+1; i++ {
		in := false
		if i <= hi && sense*tr.dlnV[i] > 0 {
			n := -tr.derivative(tr.lnP, i) / tr.dlnV[i]
			in = n > slopeLow*k && n < slopeHigh*k
		}
		switch {
		case in && from < 0:
			from = i
		case !in && from >= 0:
			if d := math.Abs(tr.lnP[i-1] - tr.lnP[from]); d > top {
				top = d
				best.I0, best.I1 = from, i
			}
			from = -1
		}
	}
	best.I0 += tr.points(trimStart)
	best.I1 -= tr.points(trimEnd)
	if best.I1-best.I0 < 5 {
		return Run{Slope: math.NaN(), Sigma: math.NaN()}
	}
	l := dsp.FitLine(tr.lnV[best.I0:best.I1], tr.lnP[best.I0:best.I1])
	best.OK, best.Slope, best.Sigma = true, -l.B, l.Sigma
	return best
}

// drop is the change of ln p over a run, as a positive number; 0 when there is none.
func (tr *trace) drop(r Run) float64 {
	if !r.OK {
		return 0
	}
	return math.Abs(tr.lnP[r.I1-1] - tr.lnP[r.I0])
}

// lastLine fits the line behind an opening, firstLine the one behind a closing. next is the first point after the
// fitted stretch, or the last one before it.
func (tr *trace) lastLine(r Run) (l dsp.Line, next int) {
	n := max(int(fitShare*float64(r.I1-r.I0)), tr.points(fitLeast))
	hi := max(r.I1-tr.points(fitMargin), r.I0+4)
	hi = min(hi, r.I1)
	lo := max(r.I1-n, r.I0)
	if hi-lo < 4 {
		lo = max(hi-4, r.I0)
	}
	return dsp.FitLine(tr.lnV[lo:hi], tr.lnP[lo:hi]), hi
}

func (tr *trace) firstLine(r Run) (l dsp.Line, before int) {
	n := max(int(fitShare*float64(r.I1-r.I0)), tr.points(fitLeast))
	hi := min(r.I0+n, r.I1)
	return dsp.FitLine(tr.lnV[r.I0:hi], tr.lnP[r.I0:hi]), r.I0 - 1
}

// nearLine fits the very beginning of a run: at suction pressure the stroke is long and its line not quite straight (heat),
// and what is behind it is short in volume.
func (tr *trace) nearLine(r Run) dsp.Line {
	n := max(int(nearShare*float64(r.I1-r.I0)), tr.points(nearLeast))
	hi := min(r.I0+n, r.I1)
	return dsp.FitLine(tr.lnV[r.I0:hi], tr.lnP[r.I0:hi])
}

// opening gives the angle of the first lasting departure from the line, in the sense of an opening: below the line
// in compression, above it in expansion; and how much further the trace takes to be riseTimes as far off the line. NaN
// when there is none before the limit.
func (tr *trace) opening(stroke int, l dsp.Line, from int) (at, rise float64) {
	start := strokeStart(tr.end, stroke)
	sense, limit := -1.0, start+latestOpen
	if stroke == Expansion {
		sense, limit = 1, start+latestOpenS
	}
	floor := math.Max(sigmas*l.Sigma, openResidual)
	last, need := tr.index(limit), tr.points(openLasting)
	prev, count := 0.0, 0
	at = math.NaN()
	for i := from; i <= last; i++ {
		r := sense * (tr.lnP[i] - l.At(tr.lnV[i]))
		if r <= floor {
			prev, count = r, 0
			continue
		}
		if count == 0 {
			at = tr.grid.At(i)
			if i > from { // linear between the last point inside and the first outside
				at -= tr.grid.Step * (r - floor) / (r - prev)
			}
		}
		if count++; count >= need {
			return at, tr.rise(sense, l, riseTimes*floor, i+1-count) - at
		}
	}
	return math.NaN(), math.NaN()
}

// rise gives the angle at which the trace first lies further off the line than a level, going on from a point; NaN when
// it does not within riseReach.
func (tr *trace) rise(sense float64, l dsp.Line, level float64, from int) float64 {
	prev := 0.0
	for i := max(from-1, 0); i < min(from+tr.points(riseReach), tr.grid.N); i++ {
		r := sense * (tr.lnP[i] - l.At(tr.lnV[i]))
		if r > level {
			if prev < r && prev <= level && i >= from {
				return tr.grid.At(i) - tr.grid.Step*(r-level)/(r-prev)
			}
			return tr.grid.At(i)
		}
		prev = r
	}
	return math.NaN()
}

// closing walks back from the run along its line and gives the angle at which the trace lastingly leaves it. At suction
// pressure a transmitter's noise is a larger share, and the residual is the mean of a few points there.
func (tr *trace) closing(stroke int, l dsp.Line, from int) float64 {
	half := 0
	if stroke == Compression {
		half = tr.points(closeMean / 2)
	}
	floor := math.Max(sigmas*l.Sigma/math.Sqrt(float64(2*half+1)), closeResidual)
	first, need := tr.index(strokeStart(tr.end, stroke)+earliestClose), tr.points(closeLasting)
	prev, count := 0.0, 0
	at := math.NaN()
	for i := from; i >= max(first, half); i-- {
		sum := 0.0
		for j := i - half; j <= i+half; j++ {
			sum += tr.lnP[j] - l.At(tr.lnV[j])
		}
		r := math.Abs(sum) / float64(2*half+1)
		if r <= floor {
			prev, count = r, 0
			continue
		}
		if count == 0 {
			at = tr.grid.At(i)
			if i < from {
				at += tr.grid.Step * (r - floor) / (r - prev)
			}
		}
		if count++; count >= need {
			return at
		}
	}
	return math.NaN()
}

// meet gives the volume at which a line reaches a pressure, m³; NaN when the line is none.
func meet(l dsp.Line, p float64) float64 {
	if !(l.B < 0) {
		return math.NaN()
	}
	return math.Exp((math.Log(p) - l.A) / l.B)
}

// angleOf is the angle of a volume on a stroke, on the padded grid's scale; NaN outside the stroke.
func (tr *trace) angleOf(volume float64, stroke int) float64 {
	clear := tr.cyl.ClearanceVolume(tr.end)
	if !(volume > clear && volume < clear+tr.cyl.Swept(tr.end)) {
		return math.NaN()
	}
	return tr.cyl.AngleOf(tr.end, volume, stroke == Compression)
}

func sized(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}
