package frame

import "math"

// swings compares each tooth's swing with the one it made a turn before: teeth differ, noise shows in what does not
// repeat. The difference of two swings, each the distance of two extremes of a noisy signal, scatters by about the
// noise itself.
type swings struct {
	last []float64 // by mark; 0: not seen
	sq   float64
	n    float64 // differences taken, up to swingsOver turns
}

const (
	swingsOver = 4   // turns that are averaged over
	swingCap   = 0.3 // of the usual swing: a tooth that was half lost is not noise
)

func (s *swings) forget() { clear(s.last) }

func (s *swings) take(mark int, height, usual float64) {
	was := s.last[mark]
	s.last[mark] = height
	if was == 0 {
		return
	}
	d := math.Min(math.Abs(height-was), swingCap*usual)
	s.n = min(s.n+1, float64(swingsOver*len(s.last)))
	s.sq += (d*d - s.sq) / s.n
}

// noise is the RMS of the signal's noise, codes; NaN before a turn of teeth has been compared.
func (s *swings) noise() float64 {
	if s.n < float64(len(s.last)) {
		return math.NaN()
	}
	return math.Sqrt(s.sq)
}
