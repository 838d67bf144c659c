package turn

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

const countPa = 0.5 // Pa per count in these tests: a 24-bit converter over 8 MPa

// A cylinder pressure made of sinusoids in angle, on a shaft that gains or loses 10 % a second. What is known from
// outside: the Gaussian of σ = 0.25° leaves exp(-(nσ)²/2) of order n and shifts nothing.
func TestPressureAtVaryingSpeed(t *testing.T) {
	orders := []float64{1, 2, 7, 20, 60}
	amps := []float64{1.5e6, 4e5, 1e5, 2e4, 5e3}
	for _, c := range []struct {
		name      string
		rate, rpm float64
		share     float64
		tol       float64 // degrees
	}{
		{"700 rpm rising", 51200, 700, 0.1, 0.001},
		{"1400 rpm falling", 51200, 1400, -0.1, 0.001},
		{"300 rpm rising", 25600, 300, 0.1, 0.003},
		{"300 rpm steady", 25600, 300, 0, 0.001},
	} {
		s := newShaft(c.rate, 7*60/c.rpm, ramp(c.rpm, c.share), nil, 1)
		p := func(deg float64, smooth float64) (v, slope float64) {
			v = 3e6
			for i, n := range orders {
				a := amps[i] * math.Exp(-math.Pow(n*smooth*math.Pi/180, 2)/2)
				sin, cos := math.Sincos((n*deg + 10*n*n) * math.Pi / 180)
				v += a * cos
				slope -= a * n * sin * math.Pi / 180
			}
			return v, slope
		}
		cfg := Config{Rate: c.rate, Throws: []ThrowConfig{{DeadCentreDeg: 77,
			Pressure: [2]Channel{{ID: "he", Gain: countPa}, None()}}}}
		conv, err := New(cfg)
		if err != nil {
			t.Fatal(err)
		}
		valid := 0
		for _, turn := range run(conv, s.frames(1, func(_ int, deg float64, _ int) float64 { v, _ := p(deg, 0); return v / countPa })) {
			if !turn.Valid() {
				continue
			}
			valid++
			th := turn.Throws[0]
			if th.P[1] != nil || len(th.P[0]) != 961 || th.Bad[0] != "" {
				t.Fatalf("%s: ends of %d and %d points, %q", c.name, len(th.P[0]), len(th.P[1]), th.Bad[0])
			}
			worst, worstPos := 0.0, 0.0
			for i, got := range th.P[0] {
				deg := 360*float64(turn.Number) + 77 + th.Grid.At(i)
				want, _ := p(deg, 0.25)
				worst = math.Max(worst, math.Abs(got-want)/(1.5e6*math.Pi/180)) // against the steepest slope of order one
				worstPos = math.Max(worstPos, math.Abs(th.Pos[i]-s.position(deg))*s.speed[int(th.Pos[i])])
				if w := s.speed[int(th.Pos[i])] * c.rate * math.Pi / 180; math.Abs(th.Omega[i]/w-1) > 5e-4 {
					t.Fatalf("%s: speed %g rad/s at point %d, want %g", c.name, th.Omega[i], i, w)
				}
			}
			if worst > c.tol || worstPos > c.tol {
				t.Errorf("%s, turn %d: off by %.5f° in pressure, %.5f° in angle, want %g°", c.name, turn.Number, worst, worstPos, c.tol)
			}
			if th.Grid.At(0) != -60 || th.Grid.At(th.Grid.N-1) != 420 || th.Pos[120] != th.T0 || th.Pos[840] != th.T1 {
				t.Errorf("%s: grid %+v, dead centres %g %g", c.name, th.Grid, th.T0, th.T1)
			}
		}
		if valid < 2 {
			t.Errorf("%s: %d valid turns", c.name, valid)
		}
	}
}

// The Gaussian's own transform, exp(-(2πfσ)²/2), gives -3 dB at f = 0.1325/σ.
func TestKernelResponse(t *testing.T) {
	gain := func(f, sigma float64) float64 { // worst over the position between samples
		worst := math.Inf(1)
		for frac := -0.45; frac <= 0.5; frac += 0.05 {
			var x, y []float64
			for i := -60.0; i <= 60; i++ {
				sin, cos := math.Sincos(2 * math.Pi * f * (i - frac))
				x, y = append(x, cos), append(y, sin)
			}
			worst = math.Min(worst, math.Hypot(lineAt(x, -60, frac, sigma), lineAt(y, -60, frac, sigma)))
		}
		return worst
	}
	for _, sigma := range []float64{0.8, 1, 3, 12.5} {
		for _, c := range []struct{ f, want float64 }{{0.1325 / sigma, math.Sqrt2 / 2}, {0.05 / sigma, math.Exp(-math.Pow(0.1*math.Pi, 2) / 2)}} {
			if g := gain(c.f, sigma); math.Abs(g-c.want) > 0.005 {
				t.Errorf("σ %g samples: gain %.4f at %.4f of the rate, want %.4f", sigma, g, c.f, c.want)
			}
		}
	}
	// The grid's Nyquist is half a cycle per step: exp(-(π/2)²/2) = -10.7 dB at any step.
	if db := 20 * math.Log10(gain(0.5/6, width(6))); math.Abs(db+10.7) > 0.1 {
		t.Errorf("%.2f dB at the grid's Nyquist, want -10.7", db)
	}
}

func TestKernelExactForLines(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		pos := rapid.Float64Range(100, 200).Draw(t, "pos")
		sigma := rapid.Float64Range(0.8, 20).Draw(t, "sigma")
		a := rapid.Float64Range(0, 8e6).Draw(t, "a")
		b := rapid.Float64Range(-1e4, 1e4).Draw(t, "b")
		var x []float64
		for i := range 300 {
			x = append(x, a+b*float64(i))
		}
		if got := lineAt(x, 0, pos, sigma); math.Abs(got-(a+b*pos)) > 1e-6 {
			t.Fatalf("%g, want %g", got, a+b*pos)
		}
	})
}

// The bias of a curved stroke is σ²p″/2p′ (second-order expansion of the smoothed curve): with pressure changing by
// a factor e in 15°, steep for a compressor, 0.002°; the stated bound is 0.003°.
func TestKernelBiasOfSteepStroke(t *testing.T) {
	perDeg := 51200 / (700 * 6.0)
	sigma := width(DefaultStep * perDeg)
	for frac := -0.5; frac <= 0.5; frac += 0.1 {
		var x []float64
		for i := -60.0; i <= 60; i++ {
			x = append(x, math.Exp(i/perDeg/15))
		}
		true0 := math.Exp(frac / perDeg / 15)
		deg := (lineAt(x, -60, frac, sigma) - true0) / (true0 / 15)
		if deg < 0.0019 || deg > 0.003 {
			t.Errorf("bias %.5f°, want about 0.0021°", deg)
		}
	}
}
