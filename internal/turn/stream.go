package turn

import (
	"math"

	"lapwing/internal/dsp"
)

// stream is one channel's recent past: engineering values of a pressure, filtered values of an accelerometer. Index 0
// of every history is the converter's base sample.
type stream struct {
	ch           Channel
	accel        bool
	x            history // of a pressure
	least        float64 // samples, the least σ of a pressure's fit
	impact, leak *band   // nil where the sampling rate does not allow them
	bad          []span  // where values lay outside the valid range
}

type band struct {
	y    history
	late int64   // samples by which y lags behind what it was made from
	rest float64 // what of a sample is left beside them
}

// span is a range of samples, both ends in it.
type span struct {
	from, to int64 // first and last value outside
	n        int64 // values outside
}

// strays is the share of a turn's pressure samples that may lie outside the valid range before the turn is not
// believed: bursts that a transducer hears from a valve seat reach beyond it for a few samples and average out.
const strays = 0.005

func newBand(s dsp.SOS) *band {
	d := delay(s)
	return &band{late: int64(math.Round(d)), rest: d - math.Round(d)}
}

// delay is what a causal filter makes of "when", in samples: the centre of the energy of its answer to an impulse,
// which is its group delay averaged over frequency with |H|² as weight (Parseval).
func delay(s dsp.SOS) float64 {
	h := make([]float64, 8192)
	h[0] = 1
	dsp.NewFilter(s).Process(h, h)
	var sum, at float64
	for n, v := range h {
		sum += v * v
		at += float64(n) * v * v
	}
	return at / sum
}

// lived gives the values from which what happened at sample 0 of the history and later can be read in place.
func (b *band) lived() []float64 { return b.y.live()[b.late:] }

// add takes a pressure's samples from seq on.
func (s *stream) add(counts []int32, seq int64) {
	dsp.Values(s.x.more(len(counts)), counts, s.ch.Gain, s.ch.Offset)
	s.watch(counts, seq)
}

// value is a sample's; the conversion keeps a compiler from fusing what dsp.Values does not fuse.
func (s *stream) value(n int32) float64 { return float64(s.ch.Gain*float64(n)) + s.ch.Offset }

func (s *stream) outside(v float64) bool {
	return (s.ch.Min != 0 || s.ch.Max != 0) && (v < s.ch.Min || v > s.ch.Max)
}

// watch notes the first and the last value outside the valid range.
func (s *stream) watch(counts []int32, seq int64) {
	if s.ch.Min == 0 && s.ch.Max == 0 || len(counts) == 0 {
		return
	}
	if least, most := dsp.Extremes(counts); !s.outside(s.value(least)) && !s.outside(s.value(most)) {
		return
	}
	out := span{from: -1, to: -1}
	for i, n := range counts {
		if s.outside(s.value(n)) {
			if out.from < 0 {
				out.from = seq + int64(i)
			}
			out.to = seq + int64(i)
			out.n++
		}
	}
	s.bad = append(s.bad, out)
}

// drop forgets n samples; seq is the first that stays.
func (s *stream) drop(n int, seq int64) {
	if !s.accel {
		s.x.drop(n)
	}
	for _, b := range [2]*band{s.impact, s.leak} {
		if b != nil {
			b.y.drop(n)
		}
	}
	k := 0
	for k < len(s.bad) && s.bad[k].to < seq {
		k++
	}
	s.bad = append(s.bad[:0], s.bad[k:]...)
}

func (s *stream) restart() {
	s.x.reset()
	s.bad = s.bad[:0]
	for _, b := range [2]*band{s.impact, s.leak} {
		if b != nil {
			b.y.reset()
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
