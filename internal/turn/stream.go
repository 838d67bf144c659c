package turn

import "lapwing/internal/dsp"

// stream is one channel's recent past: engineering values of a pressure, filtered values of an accelerometer. Index 0
// of every history is the converter's base sample.
type stream struct {
	ch           Channel
	accel        bool
	x            []float64 // pressure history; scratch for an accelerometer
	least        float64   // samples, the least σ of a pressure's kernel
	impact, leak *band     // nil where the sampling rate does not allow them
	bad          []span    // where values lay outside the valid range
}

type band struct {
	filter *dsp.Filter
	y      []float64
	fresh  bool
}

// span is a range of samples, both ends in it.
type span struct {
	from, to int64 // first and last value outside
	n        int64 // values outside
}

// strays is the share of a turn's pressure samples that may lie outside the valid range before the turn is not
// believed: bursts that a transducer hears from a valve seat reach beyond it for a few samples and average out.
const strays = 0.005

func newBand(s dsp.SOS) *band { return &band{filter: dsp.NewFilter(s), fresh: true} }

// add takes the samples from seq on.
func (s *stream) add(counts []int32, seq int64) {
	if s.accel {
		s.x = s.x[:0]
	}
	old := len(s.x)
	for _, n := range counts {
		s.x = append(s.x, s.ch.Gain*float64(n)+s.ch.Offset)
	}
	fresh := s.x[old:]
	s.watch(fresh, seq)
	s.impact.add(fresh)
	s.leak.add(fresh)
}

// watch notes the first and the last value outside the valid range.
func (s *stream) watch(x []float64, seq int64) {
	if s.ch.Min == 0 && s.ch.Max == 0 {
		return
	}
	out := span{from: -1, to: -1}
	for i, v := range x {
		if v < s.ch.Min || v > s.ch.Max {
			if out.from < 0 {
				out.from = seq + int64(i)
			}
			out.to = seq + int64(i)
			out.n++
		}
	}
	if out.from >= 0 {
		s.bad = append(s.bad, out)
	}
}

func (b *band) add(x []float64) {
	if b == nil || len(x) == 0 {
		return
	}
	if b.fresh {
		b.filter.Settle(x[0])
		b.fresh = false
	}
	old := len(b.y)
	b.y = append(b.y, x...)
	b.filter.Process(b.y[old:], b.y[old:])
}

// drop forgets n samples; seq is the first that stays.
func (s *stream) drop(n int, seq int64) {
	if !s.accel {
		s.x = shift(s.x, n)
	}
	for _, b := range [2]*band{s.impact, s.leak} {
		if b != nil {
			b.y = shift(b.y, n)
		}
	}
	k := 0
	for k < len(s.bad) && s.bad[k].to < seq {
		k++
	}
	s.bad = append(s.bad[:0], s.bad[k:]...)
}

func shift(x []float64, n int) []float64 { return x[:copy(x, x[n:])] }

func (s *stream) restart() {
	s.x, s.bad = s.x[:0], s.bad[:0]
	for _, b := range [2]*band{s.impact, s.leak} {
		if b != nil {
			b.y, b.fresh = b.y[:0], true
		}
	}
}

// suspect says why the samples from lo up to hi must not be used, or "".
func (s *stream) suspect(lo, hi int64, overload bool) string {
	var outside int64
	for _, b := range s.bad {
		if b.from < hi && b.to >= lo {
			outside += b.n
		}
	}
	if outside > 0 && (s.accel || float64(outside) > strays*float64(hi-lo)) { // an accelerometer at its rail has lost the peak
		return "outside its valid range"
	}
	switch {
	case overload:
		return "the source reported an overload"
	case s.accel && s.impact == nil:
		return "sampling rate too low for the impact band"
	}
	return ""
}
