package measure

import (
	"math"

	"lapwing/internal/turn"
)

// A template is the usual power of one event over band and time, learnt while the event stood alone (vibration.md
// section 2): it tells two events apart that ring into each other.
const (
	bandCount     = 8
	bandLo        = 3000.0 // Hz, centre of the lowest band
	bandStep      = 2200.0 // Hz from centre to centre
	hopMs         = 0.25
	leadMs        = 0.5
	frameCount    = 18 // centres from the lead to 3.75 ms after the onset
	templateMs    = 4.0
	templateFull  = 100 // events after which a template follows slowly …
	templateEvery = 8   // … and only every so many turns
	templateLeast = 20  // events before it is used
	lagWeight     = 40  // events that the lag is an average of
	lagStep       = 0.3 // ms, more than this one event does not count
)

// spectra computes short-time band powers: Hann windows of two hops.
type spectra struct {
	rate     float64
	n        int
	cos, sin [bandCount][]float64 // with the window in them
}

func (s *spectra) plan(rate float64) {
	if s.rate == rate {
		return
	}
	s.rate, s.n = rate, max(4, int(math.Round(2*hopMs*rate/1000)))
	for b := range bandCount {
		w := 2 * math.Pi * (bandLo + float64(b)*bandStep) / rate
		s.cos[b], s.sin[b] = make([]float64, s.n), make([]float64, s.n)
		for i := range s.n {
			hann := 0.5 - 0.5*math.Cos(2*math.Pi*(float64(i)+0.5)/float64(s.n))
			s.cos[b][i], s.sin[b][i] = hann*math.Cos(w*float64(i)), hann*math.Sin(w*float64(i))
		}
	}
}

// powers fills dst (frames by bands) with the band powers of all accelerometers; the first frame is centred on a
// sample position. False when the turn does not reach so far.
func (m *Measurer) powers(dst []float64, th *turn.Throw, pos float64) bool {
	clear(dst)
	for i := range th.Vib {
		v := &th.Vib[i]
		m.spec.plan(v.Rate)
		n := m.spec.n
		hop := hopMs * v.Rate / 1000
		frames := len(dst) / bandCount
		at := place(v, pos) - float64(n)/2
		if at < 0 || int(at+hop*float64(frames-1))+n > len(v.X) {
			return false
		}
		for f := range frames {
			i := int(at + hop*float64(f))
			x := v.X[i : i+n]
			for b := range bandCount {
				cos, sin := m.spec.cos[b][:n], m.spec.sin[b][:n]
				var re, im float64
				for j, a := range x {
					re += a * cos[j]
					im += a * sin[j]
				}
				dst[f*bandCount+b] += re*re + im*im
			}
		}
	}
	return true
}

// backPowers gives the band powers of the background before an event's window, per frame.
func (m *Measurer) backPowers(dst *[bandCount]float64, c *throwCtx, s spot) bool {
	lo := c.w.Ends[s.e].W[s.k].Lo
	from, to := c.th.SampleAt(lo-backDeg), c.th.SampleAt(lo)
	rate := c.th.Vib[0].Rate
	frames := int((to-from)/rate*1000/hopMs) - 1
	if frames < 1 {
		return false
	}
	m.back = sizedTo(m.back, frames*bandCount)
	if !m.powers(m.back, c.th, from+hopMs*rate/1000) {
		return false
	}
	*dst = [bandCount]float64{}
	for i, p := range m.back {
		dst[i%bandCount] += p / float64(frames)
	}
	return true
}

// learn books an event that stands alone to its template and its lag. gain is the mean square it was booked with.
func (m *Measurer) learn(c *throwCtx, s spot, b *burst, gain float64) {
	w := &c.w.Ends[s.e].W[s.k]
	mem := &m.memory[c.i].Ends[s.e][s.k]
	if math.IsNaN(w.Angle) || mem.Count >= templateFull && c.dst.Turn%templateEvery != 0 {
		return
	}
	rate := c.th.Vib[0].Rate
	if bandLo+float64(bandCount-1)*bandStep > bandReach*rate {
		return
	}
	perMs := 6 * c.th.RPM / 1000
	if !alone(c.w, s, b.deg-aheadMs*perMs, b.deg+templateMs*perMs) {
		return
	}
	var back [bandCount]float64
	m.cells = sizedTo(m.cells, frameCount*bandCount)
	if !m.backPowers(&back, c, s) || !m.powers(m.cells, c.th, b.onset-leadMs*rate/1000) {
		return
	}
	sum := 0.0
	for i := range m.cells {
		m.cells[i] = max(0, m.cells[i]-back[i%bandCount])
		sum += m.cells[i]
	}
	if !(sum > 0) {
		return
	}
	mem.Count++
	if len(mem.Cells) != len(m.cells) {
		mem.Cells = make([]float64, len(m.cells))
	}
	share := 1 / float64(min(mem.Count, templateFull))
	for i, p := range m.cells {
		mem.Cells[i] += share * (p/sum - mem.Cells[i])
	}
	mem.Level += share * (math.Log(gain/sum)/2 - mem.Level)
	lag := (b.onset - c.th.SampleAt(w.Angle)) / rate * 1000
	if mem.Count > 1 {
		lag = mem.LagMs + max(-lagStep, min(lagStep, lag-mem.LagMs))
	}
	mem.LagMs += (lag - mem.LagMs) / float64(min(mem.Count, lagWeight))
	if mem.Count >= templateFull { // counting on would say nothing
		mem.Count = templateFull
	}
}

func sizedTo(x []float64, n int) []float64 {
	if cap(x) < n {
		return make([]float64, 2*n)[:n]
	}
	return x[:n]
}
