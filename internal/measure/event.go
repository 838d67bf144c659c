package measure

import (
	"math"
	"sort"

	"lapwing/internal/dsp"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// Event measures are taken in time after the onset: ring-down knows no angle.
const (
	energyMs   = 3.0  // ms of the impact's energy
	smoothMs   = 0.1  // ms of the envelope's smoothing
	backDeg    = 7.5  // degrees of background before the window
	leastSNR   = 3.98 // 6 dB, in energy: below it the background's own scatter would decide
	aheadMs    = 1.0  // ms before the onset that must be free of another event's window
	leastEvent = 8    // samples in a window
)

// Reasons of the vibration features.
const (
	whyNoVibration = "no accelerometer signal in this turn"
	whyNoOnset     = "no impact stands out of the background"
	whyFewSamples  = "window too short for the sampling rate"
	whySNR         = "impact less than 6 dB above the background"
	whySharedEvent = "another event rings in this window"
	whyNoAngle     = "the pressure shows no angle for this event"
)

// events measures what the accelerometers say in each window. With several accelerometers on a throw the peak is the
// largest of them, energies are added, and the onset is that of the one with the largest peak. Where another event may
// ring around the onset, peak and effective value stand for both events and the rest is absent.
func (m *Measurer) events(c *throwCtx) {
	suspect := ""
	for i := range c.th.Vib {
		if s := c.th.Vib[i].Suspect; s != "" {
			suspect = s
		}
	}
	for e := range c.ix.event {
		for k, at := range c.ix.event[e] {
			if at < 0 {
				continue
			}
			w := &c.w.Ends[e].W[k]
			switch {
			case math.IsNaN(w.Lo):
				c.event(at, w.Why)
			case suspect != "": // one channel less would read as a smaller impact
				c.event(at, suspect)
			case len(c.th.Vib) == 0:
				c.event(at, whyNoVibration)
			default:
				m.event(c, e, k, at, w)
			}
		}
	}
}

// event gives every feature of an event the same reason.
func (c *throwCtx) event(at int, why string) {
	for k := range eventCount {
		c.dst.absent(at+k, why)
	}
}

// burst is what one accelerometer says of one event.
type burst struct {
	peak, meanSquare float64
	onset            float64 // sample position; NaN
	energy, back     float64 // mean squares
}

func (m *Measurer) event(c *throwCtx, e, k, at int, w *window.Window) {
	var all burst
	all.onset = math.NaN()
	for i := range c.th.Vib {
		b, ok := m.listen(c.th, &c.th.Vib[i], w)
		if !ok {
			c.event(at, whyFewSamples)
			return
		}
		if b.peak > all.peak {
			all.peak, all.onset = b.peak, b.onset
		}
		all.meanSquare += b.meanSquare
		all.energy += b.energy
		all.back += b.back
	}
	c.dst.set(at+vPeak, all.peak)
	c.dst.set(at+vRMS, math.Sqrt(all.meanSquare))
	if math.IsNaN(all.onset) {
		for _, f := range []int{vOnset, vLag, vImpact} {
			c.dst.absent(at+f, whyNoOnset)
		}
		return
	}
	onset := degAt(c.th, all.onset)
	perMs := 6 * c.th.RPM / 1000
	if w.Shared && !alone(c.w, e, k, onset-aheadMs*perMs, onset+energyMs*perMs) {
		for _, f := range []int{vOnset, vLag, vImpact} {
			c.dst.absent(at+f, whySharedEvent)
		}
		return
	}
	c.dst.set(at+vOnset, onset)
	c.dst.absent(at+vLag, whyNoAngle)
	if !math.IsNaN(w.Angle) {
		c.dst.set(at+vLag, (all.onset-c.th.SampleAt(w.Angle))/c.th.Vib[0].Rate)
	}
	switch gain := all.energy - all.back; {
	case !(all.energy >= leastSNR*all.back) || !(gain > 0):
		c.dst.absent(at+vImpact, whySNR)
	default:
		c.dst.set(at+vImpact, math.Log(gain)/2)
	}
}

// listen measures one accelerometer in one window; false when the window holds too few samples.
func (m *Measurer) listen(th *turn.Throw, v *turn.Vib, w *window.Window) (burst, bool) {
	lo := int(math.Ceil(th.SampleAt(w.Lo) - float64(v.Seq0)))
	hi := int(math.Floor(th.SampleAt(w.Hi)-float64(v.Seq0))) + 1
	back := int(math.Ceil(th.SampleAt(w.Lo-backDeg) - float64(v.Seq0)))
	lo, hi, back = max(lo, 0), min(hi, len(v.X)), max(back, 0)
	if hi-lo < leastEvent {
		return burst{}, false
	}
	var b burst
	b.peak, _ = dsp.PeakAbs(v.X[lo:hi])
	b.meanSquare = dsp.MeanSquare(v.X[lo:hi])
	if lo-back >= leastEvent {
		b.back = dsp.MeanSquare(v.X[back:lo])
	}
	smooth := max(1, int(math.Round(smoothMs*v.Rate/1000)))
	from := max(lo-smooth, 0)
	if cap(m.env) < hi-from {
		m.env = make([]float64, 2*(hi-from))
	}
	m.env = m.env[:hi-from]
	dsp.Rectify(m.env, v.X[from:hi], smooth)
	on, _, ok := dsp.Onset(m.env[lo-from:], math.Sqrt(b.back))
	b.onset, b.energy = math.NaN(), math.NaN()
	if ok {
		b.onset = float64(v.Seq0) + float64(lo) + on
		i := lo + int(on)
		j := min(i+int(energyMs*v.Rate/1000), len(v.X))
		b.energy = dsp.MeanSquare(v.X[i:j])
	}
	return b, true
}

// alone reports whether no other window of the throw reaches into a stretch of angle.
func alone(w *window.Throw, e, k int, lo, hi float64) bool {
	for e2 := range w.Ends {
		for k2 := range w.Ends[e2].W {
			o := &w.Ends[e2].W[k2]
			if (e2 == e && k2 == k) || math.IsNaN(o.Lo) {
				continue
			}
			for d := -360.0; d <= 360; d += 360 {
				if o.Lo+d < hi && lo < o.Hi+d {
					return false
				}
			}
		}
	}
	return true
}

// degAt is the angle of a sample position, linear between grid points; outside the grid its nearest end.
func degAt(th *turn.Throw, pos float64) float64 {
	n := len(th.Pos)
	i := sort.SearchFloat64s(th.Pos, pos)
	switch {
	case i == 0:
		return th.Grid.At(0)
	case i == n:
		return th.Grid.At(n - 1)
	}
	return th.Grid.At(i-1) + th.Grid.Step*(pos-th.Pos[i-1])/(th.Pos[i]-th.Pos[i-1])
}
