// Package passage finds the resonance of a gauge passage, the channel between a cylinder and its pressure transducer,
// from the raw samples of one pressure channel.
//
// It needs: some tens of stretches of two whole turns each, taken while the machine ran steadily and loaded, and where
// the valves opened in them.
// It waits: for LeastStretches of them; more make it surer.
// It emits: once, the frequency and the Q that turn.Passage undoes, each with an interval; the caller freezes them.
// When it cannot (no resonance stands out, too high to be seen, the parts of the record do not agree): why, and no
// numbers. Nothing to undo and nothing found look alike: a passage above some 80 times the shaft speed does no harm.
//
// The method is that of reference windows.md section 2, measured there on machines of another model. The first
// difference of the pressure is spread over all frequencies by the corners that the valves make in the trace, and falls
// smoothly with frequency, but for the passage, which multiplies it by 1/((1 − u²)² + (u/Q)²), u = f/f₀.
// Start and stop records give false answers: the harmonics of the shaft then sweep through the spectrum.
package passage

import (
	"fmt"
	"math"
	"slices"

	"lapwing/internal/dsp"
)

// Stretch is the pressure over two turns.
type Stretch struct {
	X      []float64 // consecutive samples over two whole turns, in any unit
	Opened []float64 // sample positions in X at which a valve of the end began to open; may be empty
}

// Found is the passage of one channel.
type Found struct {
	Reason string // why there is none; empty when there is one

	Hz, Q     float64 // of 1/(1 + s/(Q ω₀) + s²/ω₀²)
	HzU, QU   float64 // 95 % half-widths; QU is from the parts of the record and the two ways of finding Q
	Fall      float64 // by how much the variance of the log spectrum falls when the resonance is put in; see LeastFall
	Orders    float64 // Hz over the shaft's turns per second
	Stretches int
}

// Valid reports whether a passage was found.
func (f *Found) Valid() bool { return f.Reason == "" }

const (
	LeastStretches = 8   // stretches of two turns without which nothing is tried
	LeastFall      = 0.2 // of the variance of ln S, below which no resonance is believed (windows.md section 2)
	parts          = 4   // the record is cut into so many parts, which must agree
	leastOrders    = 12  // of the shaft: below lie the harmonics of the cycle itself
	lowest         = 120 // Hz
	highestShare   = .19 // of the rate: 2.2 f₀ must lie well below half the rate
	lengthApart    = .2  // share by which the lengths of stretches may differ
	mostApart      = .05 // share by which the parts' frequencies may differ, one standard deviation
	leastQ, mostQ  = 2.0, 40.0
)

// Find looks for the passage of one channel; rate is in samples per second. Stretches whose length is more than a fifth
// off the median are left out: the shaft's harmonics at several steady speeds blur each other, and the passage stands.
func Find(rate float64, list []Stretch) Found {
	list = alike(list)
	if len(list) < LeastStretches {
		return none(len(list), "%d stretches of two steady turns, at least %d are needed", len(list), LeastStretches)
	}
	s, err := newSpectra(rate, list)
	if err != nil {
		return none(len(list), "%v", err)
	}
	whole := s.median(0, 1).best()
	if whole.fall < LeastFall {
		f := none(len(list), "no resonance stands out between %.0f and %.0f Hz", s.lo(), s.hi())
		f.Fall = whole.fall
		return f
	}
	out := Found{Hz: whole.hz, Q: whole.q, Fall: whole.fall, Orders: whole.hz / s.shaft, Stretches: len(list)}

	// The parts of the record must tell the same story.
	var lnHz, lnQ []float64
	for i := range parts {
		b := s.median(i, parts).near(whole.hz)
		lnHz, lnQ = append(lnHz, math.Log(b.hz)), append(lnQ, math.Log(b.q))
	}
	apart := deviation(lnHz)
	if apart > mostApart {
		f := none(len(list), "parts of the record give frequencies %.0f %% apart around %.0f Hz", 100*apart, whole.hz)
		f.Fall = whole.fall
		return f
	}
	if whole.q <= leastQ*1.01 || whole.q >= mostQ/1.01 {
		f := none(len(list), "what stands out near %.0f Hz has not the shape of a passage", whole.hz)
		f.Fall = whole.fall
		return f
	}
	qs := 2 * deviation(lnQ) / math.Sqrt(parts)
	hz, q, ok := ring(rate, list, whole.hz)
	if !ok {
		f := none(len(list), "something stands out near %.0f Hz, but what follows the openings does not ring so", whole.hz)
		f.Fall = whole.fall
		return f
	}
	off := math.Abs(math.Log(hz / whole.hz))
	if out.Orders > harmless && (off > mostOff || math.Abs(math.Log(q/whole.q)) > math.Ln2) {
		f := none(len(list), "the spectrum says %.0f Hz and Q %.1f, the ringing after openings %.0f Hz and Q %.1f; above %g times the shaft speed neither does harm",
			whole.hz, whole.q, hz, q, harmless)
		f.Fall = whole.fall
		return f
	}
	out.Hz, out.Orders = hz, hz/s.shaft
	out.Q = math.Exp(ringShare*math.Log(q) + (1-ringShare)*math.Log(whole.q))
	out.HzU = hz * math.Max(floorHz, off/4)
	out.QU = out.Q * math.Max(floorQ, math.Max(qs, math.Abs(math.Log(q/whole.q))/2))
	return out
}

const (
	harmless  = 80.0 // times the shaft speed (leaks.md section 1, windows.md section 2)
	mostOff   = .035 // of ln f₀ between spectrum and ringing, where both may be wrong
	ringShare = .75  // of ln Q from the ringing: below 80 times the shaft speed it was within 0.9 to 1.0 of the truth
	// Floors of the half-widths, as shares: the method's own errors on modelled passages of 400 to 2260 Hz.
	floorHz, floorQ = .01, .2
)

func none(n int, format string, a ...any) Found {
	nan := math.NaN()
	return Found{Reason: fmt.Sprintf(format, a...), Hz: nan, Q: nan, HzU: nan, QU: nan, Fall: nan, Orders: nan, Stretches: n}
}

// alike keeps the stretches whose length is within a fifth of the median one.
func alike(list []Stretch) (out []Stretch) {
	var n []float64
	for _, s := range list {
		n = append(n, float64(len(s.X)))
	}
	if len(n) == 0 {
		return nil
	}
	mid := dsp.Median(n)
	for _, s := range list {
		if math.Abs(float64(len(s.X))-mid) <= lengthApart*mid && !slices.ContainsFunc(s.X, func(v float64) bool { return math.IsNaN(v - v) }) {
			out = append(out, s)
		}
	}
	return out
}

// deviation is the standard deviation.
func deviation(x []float64) float64 {
	var m, ss float64
	for _, v := range x {
		m += v / float64(len(x))
	}
	for _, v := range x {
		ss += (v - m) * (v - m)
	}
	return math.Sqrt(ss / float64(len(x)-1))
}
