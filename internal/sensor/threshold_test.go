package sensor

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/frame"
)

// margin is one threshold with the statistic it stands on.
type margin struct {
	what, fault string // the case of faultCases that shows it
	limit       float64
	below       bool // a fault lies below the limit
	stat        func(w *Watch, c *watched) float64
}

func margins() []margin {
	long := func(s *scan) float64 { return float64(max(s.top, s.bottom)) }
	return []margin{
		{"samples at an extreme", "one rail", railRun - 0.5, false, func(_ *Watch, c *watched) float64 { return long(&c.scan) }},
		{"noise of a flat top over least usual", "amplifier of a pressure saturates, with a few counts of noise", shelfQuiet, true, func(_ *Watch, c *watched) float64 { return c.scan.flats[0].noise / c.levels.Quiet[0] }},
		{"reach of a flat top over peak to peak", "amplifier of a pressure saturates, with a few counts of noise", railSame, true, func(_ *Watch, c *watched) float64 {
			if c.scan.n == 0 || math.IsNaN(c.scan.flats[0].reach) {
				return math.Inf(1)
			}
			return c.scan.flats[0].reach / (float64(c.scan.max) - float64(c.scan.min))
		}},
		{"longest one code, share of a turn", "transmitter stuck", flatShare, false, func(_ *Watch, c *watched) float64 { return float64(c.scan.run) / float64(c.scan.n) }},
		{"longest one code, ms", "converter repeats codes for 6 ms of every 80", 1000 * flatFor, false, func(w *Watch, c *watched) float64 { return 1000 * float64(c.scan.run) / w.cfg.Rate }},
		{"share of mains, quick", "open cable, 50 Hz", cableShare, false, func(w *Watch, c *watched) float64 {
			share, _ := w.mains.quick(&c.slow, c.scan.rms*c.scan.rms) // the watch itself seldom asks
			return share
		}},
		{"noise over least usual, open cable", "open cable, 50 Hz", cableRest, true, func(_ *Watch, c *watched) float64 { return c.scan.white / c.levels.White }},
		{"mean off, V", "bias lost", biasV, false, func(_ *Watch, c *watched) float64 { return math.Abs(c.scan.mean*c.PerCount - c.ZeroV) }},
		{"rms over least usual, dead", "accelerometer dead", deadRMS, true, func(_ *Watch, c *watched) float64 { return c.scan.rms / c.levels.RMS[0] }},
		{"quiet over least usual, dead", "accelerometer dead", deadQuiet, true, func(_ *Watch, c *watched) float64 { return c.scan.quiet / c.levels.Quiet[0] }},
		{"rms over white noise, dead pressure", "gauge cock closed", 2, true, func(_ *Watch, c *watched) float64 { return c.scan.rms / c.scan.white }},
		{"quiet over greatest usual, noisy", "noisy transmitter", noiseTimes, false, func(_ *Watch, c *watched) float64 { return c.scan.quiet / c.levels.Quiet[1] }},
		{"roughness of a pressure", "accelerometer and pressure swapped", swapRough, false, func(_ *Watch, c *watched) float64 { return c.scan.rough }},
		{"kurtosis of a pressure's differences", "accelerometer and pressure swapped", swapKurt, false, func(_ *Watch, c *watched) float64 { return c.scan.kurtosis }},
		{"degrees from where an end peaks", "head end and crank end swapped", swapDeg, false, func(w *Watch, c *watched) float64 { return math.Abs(w.fromInner(c)) }},
	}
}

// The statistics of a healthy recording and of each fault lie on either side of their thresholds, with room: at least
// 30 % of the limit on the healthy side. The table is what stands behind the constants.
func TestThresholds(t *testing.T) {
	var table strings.Builder
	fmt.Fprintf(&table, "\n%-40s %9s %9s | %9s | %9s %9s\n", "", "healthy", "to", "limit", "fault", "to")
	sk, info, counts := recorded(t)
	cut := func(x [][]int32) [][]int32 {
		for i := range x {
			x[i] = x[i][:int(mends*info.Rate)]
		}
		return x
	}
	// sweep gives the extremes of the statistics over the turns between break and mending.
	sweep := func(counts [][]int32, ms []margin, ids []string) (lo, hi []float64) {
		for range ms {
			lo, hi = append(lo, math.Inf(1)), append(hi, math.Inf(-1))
		}
		rig{sk: sk, learn: 16, turn: func(w *Watch, f *frame.Frame) {
			if !f.Good() || f.Mark0 < (breaks+0.2)*info.Rate {
				return
			}
			for k := range ms {
				for i := range w.ch {
					if w.ch[i].ID == ids[k] {
						v := ms[k].stat(w, &w.ch[i])
						lo[k], hi[k] = min(lo[k], v), max(hi[k], v)
					}
				}
			}
		}}.again(t, info, cut(counts))
		return lo, hi
	}
	cases := faultCases()
	of := func(m margin) int {
		return slices.IndexFunc(cases, func(c faultCase) bool { return c.name == m.fault })
	}
	var ids []string
	for _, m := range margins() {
		ids = append(ids, cases[of(m)].id)
	}
	a, b := sweep(counts, margins(), ids)
	for i, m := range margins() {
		c := cases[of(m)]
		_, _, counts := recorded(t)
		w := &wire{info: info, id: map[string][]int32{}, full: math.Exp2(float64(info.Bits - 1)), r: rand.New(rand.NewPCG(2, uint64(i)))}
		for _, ch := range sk.Channels {
			w.id[ch.ID] = counts[ch.Input]
			w.perV = w.full / ch.VoltsFull
		}
		at := breaks
		if c.whole {
			at = 0
		}
		c.do(w, at, mends)
		x, y := sweep(counts, []margin{m}, ids[i:])
		fmt.Fprintf(&table, "%-40s %9.3g %9.3g | %9.3g | %9.3g %9.3g\n", m.what, a[i], b[i], m.limit, x[0], y[0])
		switch {
		case m.below && !(a[i] > m.limit*1.4 && y[0] < m.limit/1.3), !m.below && !(b[i] < m.limit/1.3 && x[0] > m.limit*1.05):
			t.Errorf("%s: healthy %g to %g, fault %g to %g, limit %g", m.what, a[i], b[i], x[0], y[0], m.limit)
		}
	}
	t.Log(table.String())
}
