package dsp

import (
	"encoding/json"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"sort"
	"testing"
)

// vectors are reference results made by testdata/dsp/gen.py with scipy 1.10.1 and numpy 1.24.2.
type vectors struct {
	Scipy   string    `json:"scipy"`
	X       []float64 `json:"x"`
	Filters []struct {
		Kind        string
		Order       int
		Edges       []float64
		Rate        float64
		PoleRe      []float64 `json:"pole_re"`
		PoleIm      []float64 `json:"pole_im"`
		B, A, F     []float64
		HRe         []float64 `json:"h_re"`
		HIm         []float64 `json:"h_im"`
		SOSFilt     []float64 `json:"sosfilt"`
		SOSFiltFilt []float64 `json:"sosfiltfilt"`
	}
	Stats []struct {
		X, V, Y, Q, Quantile []float64
		Median, MAD          float64
		Slope, Intercept     float64
		SlopeSE              float64 `json:"slope_se"`
		Sigma                float64
		TSSlope              float64 `json:"ts_slope"`
		TSIntercept          float64 `json:"ts_intercept"`
	}
	Curves []struct {
		KX, KY, X, Spline, Pchip []float64
		SplineD                  []float64 `json:"spline_d"`
		PchipD                   []float64 `json:"pchip_d"`
	}
}

func load(t *testing.T) *vectors {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "testdata", "dsp", "vectors.json"))
	if err != nil {
		t.Fatal(err)
	}
	v := new(vectors)
	if err := json.Unmarshal(b, v); err != nil {
		t.Fatal(err)
	}
	if len(v.Filters) < 10 || len(v.Stats) < 5 || len(v.Curves) < 5 {
		t.Fatalf("vectors.json is short: %d filters, %d statistics, %d curves", len(v.Filters), len(v.Stats), len(v.Curves))
	}
	return v
}

// near fails when got and want differ by more than tol times the largest |want|.
func near(t *testing.T, what string, got, want []float64, tol float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Errorf("%s: %d values, want %d", what, len(got), len(want))
		return
	}
	var peak, worst float64
	for i := range want {
		peak = math.Max(peak, math.Abs(want[i]))
		if d := math.Abs(got[i] - want[i]); !(d <= worst) {
			worst = d
		}
	}
	if !(worst <= tol*peak) {
		t.Errorf("%s: off by %g of a peak of %g, want within %g of it", what, worst, peak, tol)
	}
}

func design(t *testing.T, kind string, order int, e []float64, rate float64) SOS {
	t.Helper()
	var s SOS
	var err error
	switch kind {
	case "lowpass":
		s, err = LowPass(order, e[0], rate)
	case "highpass":
		s, err = HighPass(order, e[0], rate)
	default:
		s, err = BandPass(order, e[0], e[1], rate)
	}
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// expand multiplies the cascade out to one numerator and one denominator in powers of 1/z.
func (s SOS) expand() (b, a []float64) {
	mul := func(p []float64, q ...float64) []float64 {
		r := make([]float64, len(p)+2)
		for i, v := range p {
			for j, w := range q {
				r[i+j] += v * w
			}
		}
		return r
	}
	b, a = []float64{1}, []float64{1}
	for _, c := range s {
		b, a = mul(b, c.B0, c.B1, c.B2), mul(a, 1, c.A1, c.A2)
	}
	return b, a
}

func TestDesignAgainstScipy(t *testing.T) {
	v := load(t)
	for _, f := range v.Filters {
		s := design(t, f.Kind, f.Order, f.Edges, f.Rate)
		name := f.Kind
		b, a := s.expand()
		near(t, name+" numerator", b[:len(f.B)], f.B, 1e-10)
		near(t, name+" denominator", a[:len(f.A)], f.A, 1e-10)
		var poles []complex128
		for _, c := range s {
			if c.A2 == 0 {
				poles = append(poles, complex(-c.A1, 0))
				continue
			}
			d := cmplx.Sqrt(complex(c.A1*c.A1-4*c.A2, 0))
			poles = append(poles, (complex(-c.A1, 0)-d)/2, (complex(-c.A1, 0)+d)/2)
		}
		if len(poles) != len(f.PoleRe) {
			t.Fatalf("%s: %d poles, want %d", name, len(poles), len(f.PoleRe))
		}
		for i := range f.PoleRe { // every reference pole has one of ours within 1e-10
			p := complex(f.PoleRe[i], f.PoleIm[i])
			sort.Slice(poles, func(j, k int) bool { return cmplx.Abs(poles[j]-p) < cmplx.Abs(poles[k]-p) })
			if d := cmplx.Abs(poles[0] - p); d > 1e-10 {
				t.Errorf("%s order %d: pole %v missed by %g", name, f.Order, p, d)
			}
			poles = poles[1:]
		}
		for i, hz := range f.F {
			h := s.Response(hz, f.Rate)
			if d := cmplx.Abs(h - complex(f.HRe[i], f.HIm[i])); d > 1e-10 {
				t.Errorf("%s order %d: response at %g Hz off by %g", name, f.Order, hz, d)
			}
		}
	}
}

func TestFilterAgainstScipy(t *testing.T) {
	v := load(t)
	for _, f := range v.Filters {
		s := design(t, f.Kind, f.Order, f.Edges, f.Rate)
		y := make([]float64, len(v.X))
		NewFilter(s).Process(y, v.X)
		near(t, f.Kind+" forwards", y, f.SOSFilt, 1e-9)
		ZeroPhase(s, y, v.X)
		near(t, f.Kind+" both ways", y, f.SOSFiltFilt, 1e-9)
	}
}

func TestStatisticsAgainstScipy(t *testing.T) {
	for _, s := range load(t).Stats {
		in := append([]float64(nil), s.V...)
		got := []float64{Median(s.V), MAD(s.V), MedianInPlace(append([]float64(nil), s.V...))}
		near(t, "median, MAD", got, []float64{s.Median, s.MAD, s.Median}, 1e-13)
		for i, q := range s.Q {
			near(t, "quantile", []float64{Quantile(s.V, q)}, []float64{s.Quantile[i]}, 1e-12)
		}
		near(t, "input kept", s.V, in, 0)
		if len(s.Y) == 0 {
			continue
		}
		l := FitLine(s.X, s.Y)
		near(t, "line", []float64{l.A, l.B, l.SE, l.Sigma}, []float64{s.Intercept, s.Slope, s.SlopeSE, s.Sigma}, 1e-10)
		a, b := TheilSen(s.X, s.Y)
		near(t, "Theil-Sen", []float64{a, b}, []float64{s.TSIntercept, s.TSSlope}, 1e-12)
	}
}

func TestCurvesAgainstScipy(t *testing.T) {
	var c Curve
	for _, k := range load(t).Curves {
		run := func() (v, d []float64) {
			hint := 0
			for _, x := range k.X {
				a, b := c.At(x, &hint)
				v, d = append(v, a), append(d, b)
			}
			return v, d
		}
		if err := c.FitSpline(k.KX, k.KY); err != nil {
			t.Fatal(err)
		}
		v, d := run()
		near(t, "spline", v, k.Spline, 1e-11)
		near(t, "spline slope", d, k.SplineD, 1e-11)
		if err := c.FitMonotone(k.KX, k.KY); err != nil {
			t.Fatal(err)
		}
		v, d = run()
		near(t, "monotone", v, k.Pchip, 1e-11)
		near(t, "monotone slope", d, k.PchipD, 1e-11)
	}
}
