package frame

import (
	"math"
	"slices"
)

// levels describe the phase signal. A pulse is an excursion z = sign·(code − base) > 0 from the resting level.
type levels struct {
	sign, base float64
	lead       bool    // the mark is the leading edge of the excursion; else the trailing one
	height     float64 // of a usual pulse, codes, > 0
	noise      float64 // RMS around the resting level, codes
}

// hop is the summary of a short stretch of the signal, an eighth of the shortest turn.
type hop struct {
	lo, hi    int32
	mean, rms float64 // rms is around the mean
}

// survey watches the signal's range hop by hop and finds its levels without knowing the speed. Hops lie at fixed
// sample numbers, so what it finds does not depend on block cuts.
type survey struct {
	length   int // samples in a hop
	hops     []hop
	n        int // hops seen since restart
	cur      hop
	k        int // samples in cur
	sum, sq  float64
	ref      float64 // sums are taken around the hop's first code, to keep them small
	scratch  []float64
	scratch2 []float64
}

// newSurvey watches over three of the slowest turns.
func newSurvey(length int, slowest float64) *survey {
	n := max(30, int(math.Ceil(3.3*slowest/float64(length))))
	return &survey{length: length, hops: make([]hop, n), scratch: make([]float64, 0, n), scratch2: make([]float64, 0, n)}
}

func (s *survey) restart() { s.n, s.k = 0, 0 }

// held gives the number of hops that can be looked at.
func (s *survey) held() int { return min(s.n, len(s.hops)) }

// full reports whether three of the slowest turns have been seen.
func (s *survey) full() bool { return s.n >= len(s.hops) }

// add takes a sample and reports whether it completed a hop.
func (s *survey) add(v int32) bool {
	if s.k == 0 {
		s.cur = hop{lo: v, hi: v}
		s.sum, s.sq, s.ref = 0, 0, float64(v)
	}
	s.cur.lo, s.cur.hi = min(s.cur.lo, v), max(s.cur.hi, v)
	d := float64(v) - s.ref
	s.sum += d
	s.sq += d * d
	if s.k++; s.k < s.length {
		return false
	}
	n := float64(s.length)
	m := s.sum / n
	s.cur.mean, s.cur.rms = s.ref+m, math.Sqrt(max(0, s.sq/n-m*m))
	s.hops[s.n%len(s.hops)] = s.cur
	s.n, s.k = s.n+1, 0
	return true
}

// Thresholds of the search.
const (
	leastHops   = 24
	leastCodes  = 3   // a pulse must be so many codes high
	leastNoises = 8   // and so many times the noise
	twoSided    = 0.4 // the lesser excursion's share of the greater above which the pulse counts as bipolar
)

// span gives the range of the signal as seen lately: the median of the extremes of three thirds of the time, so that
// disturbances in one third do not count.
func (s *survey) span() (bottom, top float64, ok bool) {
	n := s.held()
	if n < leastHops {
		return 0, 0, false
	}
	var lo, hi [3]float64
	for t := range 3 {
		l, h := int32(math.MaxInt32), int32(math.MinInt32)
		for i := t * n / 3; i < (t+1)*n/3; i++ {
			p := s.hops[(s.n-n+i)%len(s.hops)]
			l, h = min(l, p.lo), max(h, p.hi)
		}
		lo[t], hi[t] = float64(l), float64(h)
	}
	return median3(lo), median3(hi), true
}

// find gives the levels of the signal as seen lately. Not ok: there are no pulses that stand out of the noise.
//
// The resting level is the median of the hops' means.
func (s *survey) find(edge Edge) (levels, bool) {
	n := s.held()
	if n < leastHops {
		return levels{}, false
	}
	bottom, top, _ := s.span()
	means, rms := s.scratch[:0], s.scratch2[:0]
	for i := range n {
		p := &s.hops[(s.n-n+i)%len(s.hops)]
		means, rms = append(means, p.mean), append(rms, p.rms)
	}
	base := medianOf(means)
	spread := rms[:0]
	within := medianOf(rms)
	for _, m := range means { // slow noise (hum) shows between hops; those in a pulse are left out
		if d := math.Abs(m - base); d < (top-bottom)/4 {
			spread = append(spread, d)
		}
	}
	if len(spread)*3 < n {
		return levels{}, false
	}
	slow := 1.4826 * medianOf(spread)
	noise := math.Sqrt(within*within + slow*slow)
	up, down := top-base, base-bottom
	l := levels{sign: 1, base: base, height: up, noise: noise}
	both := min(up, down) > twoSided*max(up, down)
	if both && edge == Falling || !both && down > up {
		l.sign, l.height = -1, down
	}
	l.lead = (l.sign > 0) == (edge == Rising)
	return l, l.height >= leastCodes && l.height > leastNoises*noise
}

// same reports whether two descriptions tell of one signal: the mark's level and the pulse height agree.
func (l levels) same(m levels) bool {
	mid := func(l levels) float64 { return l.base + l.sign*l.height/2 }
	h := max(l.height, m.height)
	return min(l.height, m.height) > 0.6*h && math.Abs(mid(l)-mid(m)) < 0.2*h
}

func median3(x [3]float64) float64 {
	return max(min(x[0], x[1]), min(max(x[0], x[1]), x[2]))
}

// medianOf gives the median of x, whose order it changes; x must not be empty.
func medianOf(x []float64) float64 {
	slices.Sort(x)
	n := len(x)
	return (x[(n-1)/2] + x[n/2]) / 2
}
