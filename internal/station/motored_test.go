package station

import (
	"bytes"
	"encoding/json"
	"math"
	"strings"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
	"lapwing/internal/wire"
)

// motoredPlace says where a turn of the motored recording stands: the index of the dead centre that opens it. An even one
// follows the compression (expansion, then exhaust), an odd one the gas exchange (intake, then compression).
func motoredPlace(seconds float64) int {
	return int(math.Round((seconds*6*motoredRPM + motoredStart) / 360))
}

// smooth is the trace as the angle grid should show it: the cubic through the measured points under a Gaussian of half
// a grid step. Integrated anew here, in degrees, on a lattice of a hundredth of a degree.
func (m *motored) smooth(deg float64) float64 {
	const sigma, d = turn.DefaultStep / 2, 0.01
	sum, norm := 0.0, 0.0
	for x := -4.5 * sigma; x <= 4.5*sigma; x += d {
		w := math.Exp(-x * x / (2 * sigma * sigma))
		sum, norm = sum+w*m.at(deg+x), norm+w
	}
	return sum / norm
}

// least is the lowest smoothed pressure between two angles.
func (m *motored) least(lo, hi float64) float64 {
	low := math.Inf(1)
	for a := lo; a <= hi; a += turn.DefaultStep {
		low = min(low, m.smooth(a))
	}
	return low
}

func slope(x, y []float64) float64 {
	mx, my := mean(x), mean(y)
	sxy, sxx := 0.0, 0.0
	for i := range x {
		sxy, sxx = sxy+(x[i]-mx)*(y[i]-my), sxx+(x[i]-mx)*(x[i]-mx)
	}
	return sxy / sxx
}

func mean(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum / float64(len(x))
}

func spread(x []float64) float64 {
	m, sum := mean(x), 0.0
	for _, v := range x {
		sum += (v - m) * (v - m)
	}
	return math.Sqrt(sum / float64(len(x)-1))
}

func within(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s is %.6g, want %.6g ± %.2g", what, got, want, tol)
	}
}

// The way from angle to samples and back: what stands on the grid must be what was measured, but for the smoothing that
// the grid asks for. Expected figures: README of the data (exponents, peak and its place).
func TestMotoredPressuresComeBack(t *testing.T) {
	m, sk := loadMotored(t), rig(t)
	path := m.record(t, sk)
	var sum [2][]float64
	var turns [2]int
	var grid turn.Grid
	worst, worstSmall, squares, n := 0.0, 0.0, 0.0, 0
	turnsOf(t, sk, path, func(tn *turn.Turn) {
		if !tn.Valid() {
			return
		}
		th := &tn.Throws[0]
		grid = th.Grid
		at := motoredPlace(tn.Time)
		within(t, "time of a dead centre", tn.Time, (360*float64(at)-motoredStart)/(6*motoredRPM), 1e-6)
		within(t, "speed", tn.RPM, motoredRPM, 1e-3)
		kind := at & 1
		if at < -1 || at > 118 { // copies
			return
		}
		if sum[kind] == nil {
			sum[kind] = make([]float64, grid.N)
		}
		turns[kind]++
		for i, p := range th.P[crank.HE] {
			sum[kind][i] += p / 1e5
			if at > 6 && at < 12 { // every point of six turns against the smoothed data
				d := math.Abs(p/1e5 - m.smooth(360*float64(at)+grid.At(i)))
				worst, squares, n = max(worst, d), squares+d*d, n+1
				if p < 3e5 {
					worstSmall = max(worstSmall, d)
				}
			}
		}
		if th.P[crank.CE] != nil {
			t.Fatal("there is no crank end")
		}
	})
	t.Logf("%d turns after compression, %d after gas exchange; on the grid off by %.2g bar rms, %.2g at worst (%.2g under 3 bar)",
		turns[0], turns[1], math.Sqrt(squares/float64(n)), worst, worstSmall)
	if turns != [2]int{motoredCycles, motoredCycles} {
		t.Fatalf("%v valid turns of twice %d", turns, motoredCycles)
	}
	// A count is 1.2e-5 bar. What is over comes from the sampling: the data's noise has power up to 2.5 cycles a degree.
	if rms := math.Sqrt(squares / float64(n)); !(rms < 1e-3) || !(worst < 0.02) {
		t.Errorf("off by %.2g bar rms, %.2g at worst", rms, worst)
	}

	cyl := sk.Throws[0].Cylinder
	within(t, "compression ratio", cyl.Volume(crank.HE, 180)/cyl.Volume(crank.HE, 0), 21.2, 1e-5)
	within(t, "swept volume, cm³", cyl.Swept(crank.HE)*1e6, math.Pi/4*8.6*8.6*7.5, 1e-9)

	exponent := func(kind int, lo, hi float64) float64 {
		var x, y []float64
		for i := range grid.N {
			if a := grid.At(i); a >= lo && a <= hi {
				x, y = append(x, math.Log(cyl.Volume(crank.HE, a))), append(y, math.Log(sum[kind][i]/float64(turns[kind])))
			}
		}
		return -slope(x, y)
	}
	within(t, "exponent of compression, 100 to 40 degrees before the dead centre", exponent(1, 260, 320), 1.378, 0.0006)
	within(t, "exponent of expansion, 40 to 100 degrees after it", exponent(0, 40, 100), 1.407, 0.0006)

	top := 0
	for i := range sum[1] {
		if sum[1][i] > sum[1][top] {
			top = i
		}
	}
	within(t, "peak of the mean trace, degrees", grid.At(top)-360, -2.6, grid.Step)
}

// review runs the line on a recording and gives its records by type, as a reader of the file finds them.
func reviewed(t *testing.T, o ReviewOptions) (turns []wire.Turn, others map[string][]map[string]any, summary string, err error) {
	t.Helper()
	var out, sum bytes.Buffer
	o.Out, o.Summary = &out, &sum
	err = Review(t.Context(), o)
	others = map[string][]map[string]any{}
	for _, line := range bytes.Split(bytes.TrimSpace(out.Bytes()), []byte("\n")) {
		if len(line) == 0 {
			continue
		}
		var head struct{ Type string }
		if err := json.Unmarshal(line, &head); err != nil {
			t.Fatalf("%v: %s", err, line)
		}
		if head.Type == "turn" {
			var r wire.Turn
			if err := json.Unmarshal(line, &r); err != nil {
				t.Fatal(err)
			}
			turns = append(turns, r)
			continue
		}
		var r map[string]any
		if err := json.Unmarshal(line, &r); err != nil {
			t.Fatal(err)
		}
		others[head.Type] = append(others[head.Type], r)
	}
	return turns, others, sum.String(), err
}

// The whole line on measured cycles of a machine that is no compressor: right where no valve law is needed, and no
// judgement where there is nothing to judge.
func TestMotoredReview(t *testing.T) {
	t.Parallel()
	m, sk := loadMotored(t), rig(t)
	path := m.record(t, sk)
	turns, others, summary, err := reviewed(t, ReviewOptions{SkidFile: sk.File, Recording: path, LearnFrom: 10, LearnTo: 110})
	if err == nil || !strings.Contains(err.Error(), "0 steady turns") { // half of all turns are of another kind
		t.Fatalf("the learning run gave %v", err)
	}
	cyl := sk.Throws[0].Cylinder
	trace := func(at int) (p, v []float64) { // smoothed data of one turn on the grid's angles
		for a := 0.0; a <= 360; a += turn.DefaultStep {
			p = append(p, m.smooth(360*float64(at)+a))
			v = append(v, cyl.Volume(crank.HE, a))
		}
		return p, v
	}
	raw := func(at int) float64 { // −∮p dV of the measured points themselves, J
		sum := 0.0
		for k := range 1800 {
			i := 900 + 1800*at + k
			a, b := float64(k)*motoredStep, float64(k+1)*motoredStep
			sum -= (m.point(i) + m.point(i+1)) / 2 * 1e5 *
				(cyl.Volume(crank.HE, b) - cyl.Volume(crank.HE, a))
		}
		return sum
	}
	work := map[int]float64{}
	var peaks, cycles, offWork, early []float64
	absent := 0
	for _, r := range turns {
		if !r.Valid {
			if r.Reason == "" || len(r.Throws) != 0 {
				t.Errorf("turn %d: not valid, reason %q, %d throws", r.Turn, r.Reason, len(r.Throws))
			}
			continue
		}
		at := motoredPlace(r.TimeS)
		if at < -1 || at > 118 {
			continue
		}
		end := r.Throws[0].Ends[0]
		if len(r.Throws[0].Ends) != 1 || end.End != "he" {
			t.Fatalf("turn %d has ends %v", r.Turn, r.Throws[0].Ends)
		}
		// Two unlike turns to a cycle: an end that is never seen to work as a compressor's, at a duty that never settles.
		if end.State == "following" || r.Throws[0].Duty == "steady" {
			t.Errorf("turn %d: the end is %s, duty %s", r.Turn, end.State, r.Throws[0].Duty)
		}
		for _, ev := range end.Events { // nothing is delivered: no discharge valve may seem to be followed
			if ev.Event == "discharge.opens" && ev.State == "following" {
				t.Errorf("turn %d: discharge is followed at %g degrees", r.Turn, *ev.Angle)
			}
		}
		if ok := end.Values["n_comp_early"] == 0 || end.State == "not-delivering" || end.State == "lost"; !ok {
			t.Errorf("turn %d compresses and delivers nothing, the end is %s", r.Turn, end.State)
		}
		got, ok := end.Values["indicated_work_j"]
		p, v := trace(at)
		peak, least, want := p[0], p[0], 0.0
		for i := 1; i < len(p); i++ {
			peak, least = max(peak, p[i]), min(least, p[i])
			want -= (p[i] + p[i-1]) / 2 * 1e5 * (v[i] - v[i-1])
		}
		if !ok { // bursts of the transducer near 145° before the dead centre reach below zero
			absent++
			if low := m.least(360*float64(at)-turn.PadDeg, 360*float64(at+1)+turn.PadDeg); end.Absent["indicated_work_j"] == "" || low > 0 {
				t.Errorf("turn %d: no work because %q; least pressure %.2f bar", r.Turn, end.Absent["indicated_work_j"], low)
			}
			continue
		}
		work[at] = got
		within(t, "work of a turn against the smoothed data, J", got, want, 0.02)
		within(t, "peak of a turn against the smoothed data, bar", end.Values["p_max_bar_abs"], peak, 0.005)
		within(t, "least pressure of a turn against the smoothed data, bar", end.Values["p_min_bar_abs"], least, 0.02)
		offWork = append(offWork, got-raw(at))
		if at&1 == 1 {
			peaks = append(peaks, end.Values["p_max_bar_abs"])
			if n, ok := end.Values["n_comp_early"]; ok {
				early = append(early, n)
			}
			if before, ok := work[at-1]; ok {
				cycles = append(cycles, before+got)
			}
		}
	}
	t.Logf("work of a cycle %.2f ± %.2f J; of a turn off by %.3f ± %.3f J from the measured points; peak %.2f ± %.2f bar; %d turns without pressure values; early exponent %.3f ± %.3f (%d)",
		mean(cycles), spread(cycles), mean(offWork), spread(offWork), mean(peaks), spread(peaks), absent, mean(early), spread(early), len(early))
	t.Log(summary)
	// README of the data: 51.83 ± 0.19 bar. That is the highest point of each cycle; noise of 0.2 bar a point lifts it,
	// and the grid's smoothing takes most of that off again.
	within(t, "peak, bar", mean(peaks), 51.83, 0.3)
	within(t, "spread of the peak, bar", spread(peaks), 0.19, 0.05)
	within(t, "mean error of the work of a turn, J", mean(offWork), 0, 0.02)
	if len(others["finding"])+len(others["transition"]) > 0 {
		t.Errorf("judged: %v", others)
	}
	if !strings.Contains(summary, "no baseline") {
		t.Errorf("the summary does not say that nothing could be learnt:\n%s", summary)
	}
}
