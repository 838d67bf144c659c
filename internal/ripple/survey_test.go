package ripple

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"strings"
	"testing"

	"lapwing/internal/frame"
	"lapwing/internal/turn"
)

// wheel gives the angles of all marks but the first of a wheel of n pitches without its last teeth.
func wheel(n, missing int) (out []float64) {
	for i := 1; i < n-missing; i++ {
		out = append(out, 360*float64(i)/float64(n))
	}
	return out
}

// survey feeds a run seen through a wheel whose tooth k really stands off(turn, k) degrees from where it should.
func survey(t *testing.T, r *run, inner []float64, off func(turn, tooth int) float64, step func(turn int) int) *Survey {
	t.Helper()
	s, err := NewSurvey(inner)
	if err != nil {
		t.Fatal(err)
	}
	for n := range r.turns {
		f := &frame.Frame{Turn: int64(n), Mark0: r.position(360*float64(n) + off(n, 0)), Mark1: r.position(360*float64(n+1) + off(n+1, 0))}
		for k, a := range inner {
			f.Inner = append(f.Inner, r.position(360*float64(n)+a+off(n, k+1)))
		}
		s.Add(f, step(n))
	}
	return s
}

// truth is the ripple in turn's form, from the solved shaft itself: even time less angle is −Σ (aₙ/n) sin(nθ − pₙ) and a
// constant.
func truth(s *shaft) (h Harmonics) {
	n := len(s.time) - 1
	for o := range h {
		var c complex128
		for i := range n {
			deg := 360 * float64(i) / float64(n)
			d := (360*s.time[i]/s.period - deg) * rad
			c += complex(d, 0) * cmplx.Rect(2/float64(n), -float64(o+1)*deg*rad)
		}
		// d = C cos + S sin with C − iS = c; a cos p = −n S, a sin p = n C.
		h[o] = complex(float64(o+1), 0) * complex(imag(c), real(c))
	}
	return h
}

func nothing(int, int) float64 { return 0 }

func TestSurveyFindsTheRippleOfEachStep(t *testing.T) {
	m := worked()
	r := newRun(m, 51200, 700, 12, unloaded, full)
	s := survey(t, r, wheel(60, 2), nothing, func(n int) int { return []int{7, 2}[n/12] })
	found := s.Found()
	if len(found) != 2 || found[0].Step != 2 || found[1].Step != 7 {
		t.Fatalf("steps %+v", found)
	}
	for i, f := range found {
		want := truth(r.shafts[1-i])
		t.Logf("step %d, %d turns: %.4f against %.4f %%; scatter %.5f; pitch %.4f°, jitter %.4f°", f.Step, f.Turns, amps(f.Mean), amps(want), f.Scatter, f.Pitch, f.Jitter)
		if f.Turns < 7 || f.Mean.Apart(want) > 0.01 {
			t.Errorf("step %d: %v over %d turns, want %v: apart %.4f°", f.Step, f.Mean, f.Turns, want, f.Mean.Apart(want))
		}
		if f.Pitch > 0.01 || f.Jitter > 0.02 {
			t.Errorf("step %d: pitch error %.4f°, jitter %.4f° of perfect teeth", f.Step, f.Pitch, f.Jitter)
		}
	}
	if found[0].Mean.Apart(found[1].Mean) < 0.5 {
		t.Error("the two steps hardly differ: the case does not bite")
	}
	// What it is for: one mark a turn with the ripple found.
	for i, loads := range [][]load{full, unloaded} {
		one := newRun(m, 12800, 700, 12, loads)
		errs, _ := angles(t, m, one, turn.Marks{Ripple: found[i].Mean.Ripple(nil)}, nil)
		if e := p95(errs, 4, 10); e > 0.03 {
			t.Errorf("step %d: with the numbers put in, p95 is %.4f°", found[i].Step, e)
		}
	}
}

func amps(h Harmonics) (out []float64) {
	for _, z := range h {
		out = append(out, 100*cmplx.Abs(z))
	}
	return out
}

// A fixed error of each tooth is told apart from ripple but for its own share in the lowest orders, and that share lies
// within the stated error; jitter from turn to turn averages out. An eccentric wheel cannot be told from 1x ripple:
// the survey shows exactly the eccentricity as order 1.
func TestSurveyTellsPitchFromRipple(t *testing.T) {
	m := worked()
	r := newRun(m, 51200, 700, 40, full)
	want := truth(r.shafts[0])
	noise := func(k, seed int) float64 { // uniform within ±1, σ 0.577
		x := math.Sin(float64(k)*12.9898+float64(seed)*78.233) * 43758.5453
		return 2*(x-math.Floor(x)) - 1
	}
	always := func(int) int { return 0 }
	pitch := survey(t, r, wheel(60, 2), func(_, k int) float64 { return 0.1 * noise(k, 1) }, always).Found()[0]
	t.Logf("pitch σ %.4f° (made 0.058), jitter %.4f°; apart %.4f°; stated error of a₁ %.5f %%, a₂ %.5f %%", pitch.Pitch, pitch.Jitter, pitch.Mean.Apart(want), 100*pitch.Error(1), 100*pitch.Error(2))
	if math.Abs(pitch.Pitch-0.0577) > 0.015 || pitch.Jitter > 0.01 {
		t.Errorf("pitch error %.4f°, want 0.058; jitter %.4f°", pitch.Pitch, pitch.Jitter)
	}
	for o := range Orders {
		if d := cmplx.Abs(pitch.Mean[o] - want[o]); d > 3*pitch.Error(o+1) {
			t.Errorf("harmonic %d off by %.5f %%, stated error %.5f %%", o+1, 100*d, 100*pitch.Error(o+1))
		}
	}
	jitter := survey(t, r, wheel(60, 2), func(n, k int) float64 { return 0.1 * noise(k, n+10) }, always).Found()[0]
	if math.Abs(jitter.Jitter-0.0577) > 0.02 || jitter.Pitch > 0.02 || jitter.Scatter[1] <= 0 {
		t.Errorf("jitter %.4f°, want about 0.058; pitch %.4f°", jitter.Jitter, jitter.Pitch)
	}
	for o := range Orders {
		if d := cmplx.Abs(jitter.Mean[o] - want[o]); d > 3*jitter.Error(o+1) {
			t.Errorf("with jitter harmonic %d off by %.5f %%, stated error %.5f %%", o+1, 100*d, 100*jitter.Error(o+1))
		}
	}
	const ecc = 0.08 // degrees
	off := survey(t, r, wheel(60, 2), func(_, k int) float64 {
		at := append([]float64{0}, wheel(60, 2)...)[k]
		return ecc * math.Sin((at-30)*rad)
	}, always).Found()[0]
	if d := cmplx.Abs(off.Mean[0] - want[0]); math.Abs(d/(ecc*rad)-1) > 0.05 {
		t.Errorf("an eccentricity of %g° reads as %.5f %% of order 1, want %.5f", ecc, 100*d, 100*ecc*rad)
	}
	if off.Pitch > 0.01 {
		t.Errorf("an eccentricity is called a pitch error of %.4f°: it cannot be told apart", off.Pitch)
	}
}

// The phase counts from the mark that stays: moved to another mark the ripple is the same ripple.
func TestHarmonicsMoveWithTheMark(t *testing.T) {
	h := Harmonics{cmplx.Rect(0.01, 0.3), cmplx.Rect(0.02, -1), 0, cmplx.Rect(0.001, 2)}
	g := h.Moved(70)
	speed := func(h Harmonics, deg float64) (w float64) {
		for _, r := range h.Ripple(nil) {
			w += r.Amp * math.Cos((float64(r.Order)*deg-r.PhaseDeg)*rad)
		}
		return w
	}
	for deg := 0.0; deg < 360; deg += 17 {
		if a, b := speed(h, deg), speed(g, deg-70); math.Abs(a-b) > 1e-12 {
			t.Fatalf("at %g°: %g and %g", deg, a, b)
		}
	}
}

// Turns with a lost tooth, and their neighbours, do not count; nor do those across a hole in the numbering.
func TestSurveyTakesWholeTurnsOnly(t *testing.T) {
	m := worked()
	r := newRun(m, 12800, 700, 20, full)
	inner := wheel(36, 1)
	count := func(spoil func(n int, f *frame.Frame) bool) int {
		s, err := NewSurvey(inner)
		if err != nil {
			t.Fatal(err)
		}
		for n := range r.turns {
			f := &frame.Frame{Turn: int64(n), Mark0: r.position(360 * float64(n)), Mark1: r.position(360 * float64(n+1))}
			for _, a := range inner {
				f.Inner = append(f.Inner, r.position(360*float64(n)+a))
			}
			if spoil(n, f) {
				s.Add(f, 0)
			}
		}
		if len(s.steps) == 0 {
			return 0
		}
		return s.Found()[0].Turns
	}
	for name, c := range map[string]struct {
		spoil func(n int, f *frame.Frame) bool
		want  int
	}{
		"sound":          {func(int, *frame.Frame) bool { return true }, 17},
		"a tooth lost":   {func(n int, f *frame.Frame) bool { f.Inner[5] = nanAt(n == 9, f.Inner[5]); return true }, 6 + 7},
		"a turn lost":    {func(n int, _ *frame.Frame) bool { return n != 9 }, 6 + 7},
		"marked missing": {func(n int, f *frame.Frame) bool { f.Q = frame.Missing * frame.Quality(b2i(n == 9)); return true }, 6 + 7},
		"too few marks":  {func(_ int, f *frame.Frame) bool { f.Inner = f.Inner[1:]; return true }, 0},
	} {
		if got := count(c.spoil); got != c.want {
			t.Errorf("%s: %d turns counted, want %d", name, got, c.want)
		}
	}
	for _, bad := range [][]float64{nil, wheel(5, 0), {10, 20, 15, 40, 50, 60, 70}, {10, 20, 30, 40, 50, 360}} {
		if _, err := NewSurvey(bad); err == nil {
			t.Errorf("teeth at %v are taken", bad)
		}
	}
}

func nanAt(yes bool, x float64) float64 {
	if yes {
		return math.NaN()
	}
	return x
}

func b2i(b bool) int {
	if b {
		return 1
	}
	return 0
}

// Each doubt is raised by what it is about, and by nothing else.
func TestDoubtsAboutASurvey(t *testing.T) {
	sound := func() Found {
		return Found{Turns: 200, Orders: Orders, Samples: 4000, Spread: 0.004, Teeth: make([]float64, 58), Pitch: 0.005, Jitter: 0.01,
			Mean: Harmonics{0.004, 0.01i, 0.0005, 0.00001}, Scatter: [Orders]float64{1e-4, 1e-4, 1e-4, 1e-4}}
	}
	for name, c := range map[string]struct {
		spoil func(*Found)
		want  string
	}{
		"sound":         {func(*Found) {}, ""},
		"few turns":     {func(f *Found) { f.Turns = 30 }, "only 30 whole turns"},
		"few teeth":     {func(f *Found) { f.Teeth = f.Teeth[:8]; f.Pitch = 0.001 }, "8 teeth"},
		"speed":         {func(f *Found) { f.Spread = 0.1 }, "moved by 10 %"},
		"pitch":         {func(f *Found) { f.Pitch = 0.15 }, "may feign"},
		"jitter":        {func(f *Found) { f.Jitter = 0.2 }, "jitters by 0.200°"},
		"wander":        {func(f *Found) { f.Scatter[1] = 0.005 }, "wanders by ±0.40°"},
		"not known":     {func(f *Found) { f.Mean[0] = 2e-4; f.Scatter[0] = 1e-3 }, "harmonic 1 is 0.020 %"},
		"too strong":    {func(f *Found) { f.Mean[1] = 0.06 }, "6.5 % in all"},
		"small order 1": {func(f *Found) { f.Mean[0] = 0 }, ""},
	} {
		f := sound()
		c.spoil(&f)
		got := f.Doubts()
		if c.want == "" && len(got) != 0 || c.want != "" && (len(got) != 1 || !strings.Contains(got[0], c.want)) {
			t.Errorf("%s: %q, want %q", name, got, c.want)
		}
	}
	f := sound()
	if f.Known(4) || !f.Known(3) || !f.Known(1) {
		t.Error("order 3 stands out and order 4 does not")
	}
	g := sound()
	g.Step = 1
	if s := Eccentric([]Found{f}); !strings.Contains(s, "cannot be told") {
		t.Error(s)
	}
	if s := Eccentric([]Found{f, g}); !strings.Contains(s, "alike in all") {
		t.Error(s)
	}
	g.Mean[0] = -0.004
	if s := Eccentric([]Found{f, g}); !strings.Contains(s, "differs between load steps 0 and 1 by 0.800 %") {
		t.Error(s)
	}
}

// The stated half-width against drawn errors: amplitude components of σ each give angle errors 95 % of which lie within.
func TestHalfWidthHoldsNinetyFivePerCent(t *testing.T) {
	const sigma = 1e-3
	u := halfWidth(func(int) float64 { return sigma }, 2)
	var errs []float64
	rnd := rand.New(rand.NewPCG(1, 2))
	for range 4000 {
		e, deg := 0.0, 360*rnd.Float64()
		for n := 1; n <= 2; n++ {
			z := complex(sigma*rnd.NormFloat64(), sigma*rnd.NormFloat64())
			a, p := cmplx.Polar(z)
			e += a / float64(n) * (math.Sin(float64(n)*deg*rad-p) + math.Sin(p)) / rad
		}
		errs = append(errs, math.Abs(e))
	}
	within := 0
	for _, e := range errs {
		if e <= u {
			within++
		}
	}
	if share := float64(within) / float64(len(errs)); share < 0.93 || share > 0.97 {
		t.Errorf("%.3f of the errors lie within ±%.3f°", share, u)
	}
}
