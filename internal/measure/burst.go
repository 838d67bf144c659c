package measure

import (
	"math"

	"lapwing/internal/dsp"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// Event measures are taken in time after the onset: ring-down knows no angle.
const (
	energyMs   = 3.0  // ms of the impact's energy
	smoothMs   = 0.1  // ms of the envelope's smoothing
	riseMs     = 0.3  // ms that an onset is walked back at most
	riseShare  = 0.15 // of the peak, down to where it is walked back
	riseBack   = 4.0  // or to so many backgrounds
	backDeg    = 7.5  // degrees of background before the window
	backTailMs = 2.0  // ms that an earlier event rings into it
	leastSNR   = 3.98 // 6 dB, in energy: below it the background's own scatter would decide
	leastEvent = 8    // samples in a window
)

// burst is what the accelerometers of a throw say in one window. With several of them the peak is the largest of all,
// mean squares are added, and the onset is that of the one with the largest peak.
type burst struct {
	why              string // why nothing can be said
	peak, meanSquare float64
	onset            float64 // sample position; NaN
	deg              float64 // the onset's angle
	energy, back     float64 // mean squares, energyMs from the onset and before the window
	loud             int     // the accelerometer with the largest peak
	loudBack         float64 // its own background
}

// sense measures all accelerometers in one window.
func (m *Measurer) sense(all *burst, c *throwCtx, s spot) {
	all.why = ""
	th, w := c.th, &c.w.Ends[s.e].W[s.k]
	tail := backTailMs * 6 * th.RPM / 1000
	clean := alone(c.w, s, w.Lo-backDeg-tail, w.Lo)
	for i := range th.Vib {
		usual := math.NaN()
		if !clean {
			usual = m.usualBack(c, i)
		}
		b, ok := m.listen(th, &th.Vib[i], w, usual)
		if !ok {
			all.why = whyFewSamples
			return
		}
		if b.peak > all.peak {
			all.peak, all.onset, all.loud, all.loudBack = b.peak, b.onset, i, b.back
		}
		all.meanSquare += b.meanSquare
		all.energy += b.energy
		all.back += b.back
	}
	if !math.IsNaN(all.onset) {
		all.deg = degAt(th, all.onset)
	}
}

// usualBack is the mean square in the middle one of a turn's bins: the background where an earlier event still rings.
func (m *Measurer) usualBack(c *throwCtx, i int) float64 {
	for len(c.usual) <= i {
		v := &c.th.Vib[len(c.usual)]
		b := math.NaN()
		if len(v.RMS) == c.th.Grid.N {
			m.x = append(m.x[:0], v.RMS[c.i0:c.i1]...)
			b = dsp.MedianInPlace(m.x)
			b *= b
		}
		c.usual = append(c.usual, b)
	}
	return c.usual[i]
}

// listen measures one accelerometer in one window; false when the window holds too few samples. A usual background
// that is known takes the place of that before the window.
func (m *Measurer) listen(th *turn.Throw, v *turn.Vib, w *window.Window, usual float64) (burst, bool) {
	lo := int(math.Ceil(place(v, th.SampleAt(w.Lo))))
	hi := int(math.Floor(place(v, th.SampleAt(w.Hi)))) + 1
	back := int(math.Ceil(place(v, th.SampleAt(w.Lo-backDeg))))
	lo, hi, back = max(lo, 0), min(hi, len(v.X)), max(back, 0)
	if hi-lo < leastEvent {
		return burst{}, false
	}
	var b burst
	b.peak, _ = dsp.PeakAbs(v.X[lo:hi])
	b.meanSquare = dsp.MeanSquare(v.X[lo:hi])
	if b.back = usual; math.IsNaN(usual) {
		b.back = 0
	}
	if lo-back >= leastEvent && math.IsNaN(usual) {
		b.back = dsp.MeanSquare(v.X[back:lo])
	}
	smooth := smoothing(v.Rate)
	from := max(lo-smooth, 0)
	if cap(m.env) < hi-from {
		m.env = make([]float64, 2*(hi-from))
	}
	m.env = m.env[:hi-from]
	dsp.Rectify(m.env, v.X[from:hi], smooth)
	on, peak, ok := dsp.Onset(m.env[lo-from:], math.Sqrt(b.back))
	b.onset, b.energy = math.NaN(), math.NaN()
	if ok {
		on = rise(m.env[lo-from:], on, peak, math.Sqrt(b.back), int(riseMs*v.Rate/1000))
		on -= riseShare * float64(smooth) // what a mean over so many samples takes to show this share of a step
		b.onset = float64(v.Seq0) - v.Late + float64(lo) + on
		i := max(lo+int(math.Floor(on)), 0)
		j := min(i+int(energyMs*v.Rate/1000), len(v.X))
		b.energy = dsp.MeanSquare(v.X[i:j])
	}
	return b, true
}

// place is where in v.X stands what happened at a sample position: the filter gives it late.
func place(v *turn.Vib, pos float64) float64 { return pos - float64(v.Seq0) + v.Late }

// smoothing is the envelope's length in samples.
func smoothing(rate float64) int { return max(1, int(math.Round(smoothMs*rate/1000))) }

// rise walks back from the onset found to where the envelope began to rise: the limit of 0.35 of the peak may be crossed
// by the first swing or by a later one, as the modes happen to beat, and the start of the rise is common to both. It goes
// back only as long as the envelope stays over a lower limit, so that flow noise ahead of the impact does not count.
func rise(e []float64, on, peak, back float64, most int) float64 {
	limit := math.Max(riseShare*peak, riseBack*back)
	for i := int(on); i > max(0, int(on)-most); i-- {
		if e[i] <= limit {
			if e[i+1] > limit {
				return min(on, float64(i)+(limit-e[i])/(e[i+1]-e[i]))
			}
			return on
		}
	}
	return on
}
