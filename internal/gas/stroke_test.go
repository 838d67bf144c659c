package gas

import (
	"math"
	"testing"
)

// TestLnDensity: along an isentrope, against the density that GERG-2008 has at the entropy of suction; and how far one mean
// exponent is off, which is what the correction is for.
func TestLnDensity(t *testing.T) {
	for _, c := range []struct {
		gas        string
		ts, ps, pd float64
		least      float64 // error of one mean exponent, at least
	}{
		{"biomethane", 293.15, 8e5, 22e5, 8e-4}, {"pipeline-gas", 303, 20e5, 50e5, 1e-4}, {"pipeline-gas", 290, 30e5, 110e5, 4e-3},
		{"hydrogen-makeup", 311, 20e5, 38e5, 0}, {"carbon-dioxide", 310, 20e5, 50e5, 1e-4}, {"air", 293.15, 1.01325e5, 4e5, 1e-4},
	} {
		m, err := Named(c.gas)
		if err != nil {
			t.Fatal(err)
		}
		d, err := m.Duty(c.ps, c.ts, c.pd)
		if err != nil {
			t.Fatal(err)
		}
		worst, mean := 0.0, 0.0
		for _, f := range []float64{0, .25, .5, .75, 1} {
			p := c.ps * math.Pow(c.pd/c.ps, f)
			path, err := m.Isentropic(c.ts, c.ps, p)
			if err != nil {
				t.Fatal(err)
			}
			want := math.Log(path.To.Rho / path.From.Rho)
			worst = max(worst, math.Abs(d.LnDensity(c.ps, c.pd, p)-want))
			mean = max(mean, math.Abs(math.Log(p/c.ps)/d.KV-want))
		}
		t.Logf("%s at %.0f to %.0f bar: exponent %.4f to %.4f, off by %.1e; with one mean exponent %.1e", c.gas, c.ps/1e5, c.pd/1e5, d.KVs, d.KVd, worst, mean)
		if worst > 1e-4 && worst > 0.1*mean {
			t.Errorf("%s: off by %.2e in ln ρ", c.gas, worst)
		}
		if mean < c.least {
			t.Errorf("%s: one mean exponent is off by %.2e only; the test shows nothing", c.gas, mean)
		}
	}
	fixed := Props{KV: 1.3, KVs: 1.3, KVd: 1.3}
	within(t, "one exponent", fixed.LnDensity(1e5, 3e5, 2e5), math.Log(2)/1.3, 1e-14)
	within(t, "no ratio", Props{KV: 1.3, KVs: 1.31, KVd: 1.29}.LnDensity(1e5, 1e5, 1e5), 0, 1e-14)
}
