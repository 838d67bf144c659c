package dsp

import (
	"math"
	"math/cmplx"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestDesignRefusals(t *testing.T) {
	for _, c := range []struct {
		name string
		err  error
	}{
		{"order 0", second(LowPass(0, 100, 1000))},
		{"order 13", second(HighPass(13, 100, 1000))},
		{"no rate", second(LowPass(2, 100, 0))},
		{"NaN rate", second(LowPass(2, 100, math.NaN()))},
		{"NaN edge", second(LowPass(2, math.NaN(), 1000))},
		{"zero edge", second(BandPass(2, 0, 100, 1000))},
		{"Nyquist", second(BandPass(2, 100, 500, 1000))},
		{"crossed edges", second(BandPass(2, 200, 100, 1000))},
	} {
		if c.err == nil {
			t.Errorf("%s: no error", c.name)
		}
	}
}

func second(_ SOS, err error) error { return err }

// Butterworth by definition: half power at the edges, unit gain at the reference point (S. Butterworth, 1930).
func TestHalfPowerAtEdges(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		order := rapid.IntRange(1, 8).Draw(t, "order")
		rate := rapid.Float64Range(1e3, 2e5).Draw(t, "rate")
		lo := rapid.Float64Range(0.01, 0.3).Draw(t, "lo") * rate
		hi := min(lo*rapid.Float64Range(1.5, 20).Draw(t, "span"), 0.48*rate)
		lp, _ := LowPass(order, hi, rate)
		hp, _ := HighPass(order, hi, rate)
		bp, _ := BandPass(order, lo, hi, rate)
		for _, g := range []complex128{lp.Response(hi, rate), hp.Response(hi, rate), bp.Response(lo, rate), bp.Response(hi, rate)} {
			if math.Abs(cmplx.Abs(g)-math.Sqrt2/2) > 1e-6 {
				t.Fatalf("gain at an edge %g, want 0.7071", cmplx.Abs(g))
			}
		}
		if g := lp.Response(0, rate); cmplx.Abs(g-1) > 1e-12 {
			t.Fatalf("low-pass gain at 0 Hz %v", g)
		}
		if g := hp.Response(rate/2, rate); math.Abs(cmplx.Abs(g)-1) > 1e-12 {
			t.Fatalf("high-pass gain at Nyquist %v", g)
		}
	})
}

func TestFilterAnyCutSameBits(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		order := rapid.IntRange(1, 5).Draw(t, "order")
		s, err := BandPass(order, 2000, 11000, 25600)
		if order == 5 {
			s, err = LowPass(5, 300, 25600)
		}
		if err != nil {
			t.Fatal(err)
		}
		x := rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), 1, 50).Draw(t, "x")
		n := rapid.IntRange(1, 3000).Draw(t, "n")
		for len(x) < n { // repeat, then silence, so that the state decays to nothing
			x = append(x, x[len(x)%7%len(x)]/float64(len(x)))
		}
		x = append(x, make([]float64, 3000)...)
		whole, parts := make([]float64, len(x)), make([]float64, len(x))
		NewFilter(s).Process(whole, x)
		f := NewFilter(s)
		for i := 0; i < len(x); {
			j := min(len(x), i+rapid.IntRange(0, 1500).Draw(t, "cut"))
			copy(parts[i:j], x[i:j])
			f.Process(parts[i:j], parts[i:j])
			i = j
		}
		for i := range whole {
			if math.Float64bits(whole[i]) != math.Float64bits(parts[i]) {
				t.Fatalf("sample %d: %v whole, %v in parts", i, whole[i], parts[i])
			}
		}
	})
}

func TestSilenceLeavesNoSubnormals(t *testing.T) {
	s, _ := LowPass(3, 2000, 25600)
	f := NewFilter(s)
	x := make([]float64, 8192)
	x[0] = 1
	f.Process(x, x)
	for i, z := range f.z {
		if z != [2]float64{} {
			t.Errorf("section %d still holds %v after silence", i, z)
		}
	}
}

func TestSettleAndReset(t *testing.T) {
	for _, order := range []int{1, 2, 3, 4} {
		lp, _ := LowPass(order, 900, 25600)
		bp, _ := BandPass(order, 900, 5000, 25600)
		for _, c := range []struct {
			s    SOS
			want float64
		}{{lp, 7.5}, {bp, 0}} {
			f := NewFilter(c.s)
			f.Process(make([]float64, 9), []float64{1, 2, 3, 4, 5, 6, 7, 8, 9})
			f.Settle(7.5)
			y := slices.Repeat([]float64{7.5}, 40)
			f.Process(y, y)
			for i, v := range y {
				if math.Abs(v-c.want) > 1e-11 {
					t.Fatalf("order %d: settled filter gives %g at %d, want %g", order, v, i, c.want)
				}
			}
			f.Reset()
			y = make([]float64, 5)
			f.Process(y, y)
			near(t, "at rest", y, make([]float64, 5), 0)
		}
	}
}

func TestZeroPhaseShort(t *testing.T) {
	s, _ := LowPass(4, 900, 25600)
	for n := range 5 { // a constant stays a constant, however short
		y := slices.Repeat([]float64{3}, n)
		ZeroPhase(s, y, y)
		for _, v := range y {
			if math.Abs(v-3) > 1e-11 {
				t.Errorf("%d samples: %g, want 3", n, v)
			}
		}
	}
}

func TestQuantileIsSelection(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(-5, 5), 1, 60).Draw(t, "x")
		if rapid.Bool().Draw(t, "ties") {
			for i := range x {
				x[i] = math.Round(x[i])
				if math.Abs(x[i]) > 3 {
					x[i] = math.Inf(int(x[i]))
				}
			}
		}
		k := rapid.IntRange(0, len(x)-1).Draw(t, "k")
		sorted := slices.Sorted(slices.Values(x))
		w := slices.Clone(x)
		if got := nth(w, k); got != sorted[k] || w[k] != got || slices.Max(w[:k+1]) > got || slices.Min(w[k:]) < got {
			t.Fatalf("value %d of %v: %v, want %v; moved to %v", k, x, got, sorted[k], w)
		}
	})
}

func TestStatisticsOfNothing(t *testing.T) {
	nan := math.NaN()
	a, b := TheilSen([]float64{1, 1}, []float64{2, 3})
	l := FitLine([]float64{2, 2}, []float64{1, 5})
	for i, v := range []float64{Median(nil), MAD([]float64{nan}), Quantile(nil, 0.3), b, a, l.A, l.B, MeanSquare(nil), FitLine(nil, nil).B} {
		if !math.IsNaN(v) {
			t.Errorf("case %d: %v, want NaN", i, v)
		}
	}
	if m := Median([]float64{nan, 4, nan, 2}); m != 3 {
		t.Errorf("median past NaN: %v, want 3", m)
	}
	if l := FitLine([]float64{1, 3}, []float64{2, 8}); l.B != 3 || l.A != -1 || !math.IsNaN(l.SE) || l.At(2) != 5 {
		t.Errorf("two points: %+v", l)
	}
}

// A quarter of wild points must not move Theil-Sen: the breakdown point is 29 % (Sen, 1968), least squares has none.
func TestTheilSenIgnoresWildPoints(t *testing.T) {
	var x, y []float64
	for i := range 40 {
		x = append(x, float64(i))
		y = append(y, 2+0.5*float64(i))
		if i%4 == 3 {
			y[i] += 1000
		}
	}
	a, b := TheilSen(x, y)
	if math.Abs(a-2) > 1e-9 || math.Abs(b-0.5) > 1e-9 {
		t.Errorf("got %g + %g x, want 2 + 0.5 x", a, b)
	}
}

func TestSplineExactForCubics(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		co := rapid.SliceOfN(rapid.Float64Range(-3, 3), 4, 4).Draw(t, "coefficients")
		f := func(x float64) float64 { return co[0] + x*(co[1]+x*(co[2]+x*co[3])) }
		x := []float64{rapid.Float64Range(-2, 2).Draw(t, "x0")}
		for range rapid.IntRange(3, 12).Draw(t, "knots") {
			x = append(x, x[len(x)-1]+rapid.Float64Range(0.3, 1.2).Draw(t, "h"))
		}
		var y []float64
		for _, v := range x {
			y = append(y, f(v))
		}
		var c Curve
		if err := c.FitSpline(x, y); err != nil {
			t.Fatal(err)
		}
		hint := rapid.IntRange(-1, 20).Draw(t, "hint")
		at := rapid.Float64Range(x[0]-0.3, x[len(x)-1]+0.3).Draw(t, "at")
		v, d := c.At(at, &hint)
		if math.Abs(v-f(at)) > 1e-8*(1+math.Abs(f(at))) || math.Abs(d-(co[1]+at*(2*co[2]+at*3*co[3]))) > 1e-7*(1+math.Abs(d)) {
			t.Fatalf("at %g: %g slope %g, want %g", at, v, d, f(at))
		}
	})
}

func TestMonotoneStaysMonotone(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x, y := []float64{0}, []float64{0}
		for range rapid.IntRange(1, 15).Draw(t, "knots") {
			x = append(x, x[len(x)-1]+rapid.Float64Range(0.01, 3).Draw(t, "h"))
			y = append(y, y[len(y)-1]+rapid.Float64Range(0, 5).Draw(t, "rise"))
		}
		var c Curve
		if err := c.FitMonotone(x, y); err != nil {
			t.Fatal(err)
		}
		hint, last := 0, math.Inf(-1)
		for i := range 301 {
			v, _ := c.At(x[len(x)-1]*float64(i)/300, &hint)
			if v < last-1e-9 {
				t.Fatalf("falls from %g to %g", last, v)
			}
			last = v
		}
	})
}

func TestCurveRefusals(t *testing.T) {
	var c Curve
	for _, k := range [][2][]float64{{{1}, {1}}, {{1, 1}, {1, 2}}, {{2, 1}, {1, 2}}, {{1, math.NaN()}, {1, 2}},
		{{1, 2}, {1, math.Inf(1)}}, {{1, 2}, {1}}} {
		if c.FitSpline(k[0], k[1]) == nil || c.FitMonotone(k[0], k[1]) == nil {
			t.Errorf("knots %v taken", k)
		}
	}
}

func TestRectifyLooksBackOnly(t *testing.T) {
	src := []float64{0, 0, -6, 0, 0, 3}
	dst := make([]float64, 6)
	Rectify(dst, src, 3)
	near(t, "envelope", dst, []float64{0, 0, 2, 2, 2, 1}, 1e-15)
	Rectify(dst, src, 0)
	near(t, "rectified", dst, []float64{0, 0, 6, 0, 0, 3}, 0)
}

func TestOnset(t *testing.T) {
	for _, c := range []struct {
		name string
		e    []float64
		b    float64
		at   float64
		ok   bool
	}{
		{"share of the peak decides", []float64{0, 0, 1, 10, 4}, 0.1, 2 + 2.5/9, true},
		{"background decides", []float64{1, 1, 2, 10, 4}, 2, 2 + 6.0/8, true},
		{"buried", []float64{1, 2, 3}, 1, math.NaN(), false},
		{"before the window", []float64{9, 10, 3}, 1, math.NaN(), false},
		{"nothing", nil, 1, math.NaN(), false},
	} {
		at, _, ok := Onset(c.e, c.b)
		if ok != c.ok || (ok && math.Abs(at-c.at) > 1e-12) {
			t.Errorf("%s: %g %v, want %g %v", c.name, at, ok, c.at, c.ok)
		}
	}
	if p, at := PeakAbs([]float64{1, -4, 3}); p != 4 || at != 1 {
		t.Errorf("peak %g at %d", p, at)
	}
	if ms := MeanSquare([]float64{3, -4}); ms != 12.5 {
		t.Errorf("mean square %g", ms)
	}
}

func BenchmarkFilterTwoSections(b *testing.B) {
	s, _ := BandPass(2, 2000, 20000, 51200)
	f, x := NewFilter(s), make([]float64, 4096)
	for i := range x {
		x[i] = math.Sin(float64(i * i))
	}
	y := make([]float64, len(x))
	b.ReportAllocs()
	for b.Loop() {
		f.Process(y, x)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/4096, "ns/sample")
}
