package exec

import (
	"math"
	"time"
)

// timeline holds the count of samples against the clock. A block comes some time after its last sample was taken: a delay
// that jumps about with the load of the machine but has a floor. The floor, taken over a few seconds, moves only with the
// converter's drift; when it steps up and stays, samples are missing.
type timeline struct {
	rate  float64
	start time.Time // of sample 0
	floor float64   // s, of the window before; the first block's is 0
	known bool      // a whole window has passed

	low   float64 // lowest of the window in hand
	until float64 // s since start at which it ends

	at0, floor0 float64 // where drift begins to be counted
	drifted     float64 // floor now less the floor of then
	at          float64
}

const (
	windowSeconds = 5.0
	missing       = 0.1   // s by which the floor must step up
	driftAfter    = 600.0 // s: until then the jumps of the floor say more than the drift
)

func newTimeline(rate float64) timeline { return timeline{rate: rate, low: math.Inf(1)} }

// begin takes the first block, n samples at now, and gives the time of the first sample.
func (t *timeline) begin(now time.Time, n int) time.Time {
	t.start = now.Add(-time.Duration(float64(n) / t.rate * 1e9))
	t.until = windowSeconds
	return t.start.UTC().Round(0)
}

// see takes a block whose last sample is before number end, and gives how many samples are missing before it.
func (t *timeline) see(now time.Time, end int64) int64 {
	at := now.Sub(t.start).Seconds()
	t.low = min(t.low, at-float64(end)/t.rate)
	if at < t.until {
		return 0
	}
	low, first := t.low, !t.known
	t.low, t.until, t.known = math.Inf(1), at+windowSeconds, true
	if step := low - t.floor; step > missing && !first {
		return int64(math.Round(step * t.rate)) // the count goes on by so much: the floor is the old one again
	}
	t.floor = low
	if first {
		t.at0, t.floor0 = at, low
	}
	t.at, t.drifted = at, low-t.floor0
	return 0
}

// resume takes the first block of n samples after a gap; next is the number that would have followed. It gives how many
// samples were missed.
func (t *timeline) resume(now time.Time, next int64, n int) int64 {
	at := now.Sub(t.start).Seconds()
	k := int64(math.Round((at-t.floor)*t.rate)) - int64(n) - next
	t.low, t.until = math.Inf(1), at+windowSeconds
	return max(0, k)
}

// drift gives by how many millionths the converter is faster than stated.
func (t *timeline) drift() (ppm float64, ok bool) {
	if span := t.at - t.at0; t.known && span >= driftAfter {
		return -t.drifted / span * 1e6, true
	}
	return 0, false
}
