package passage

import (
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

const slow = 20000.0 // samples per second of the closed form

// bell is a trace with corners, as valves make them, seen through the exact response of a mass on a spring: the sum of
// the closed solutions for every change of slope. It owes nothing to the package under test.
func bell(rpm, hz, q, noise float64, pairs int, seed uint64) (list []Stretch) {
	turn := 60 / rpm
	rng := rand.New(rand.NewPCG(seed, 1))
	// Corners of the cycle: share of a turn, change of slope in units per turn.
	corners := [][2]float64{{.14, 9}, {.30, -5}, {.50, 6}, {.70, -14}, {.84, 7}, {.97, -3}}
	w := 2 * math.Pi * hz
	zeta := 1 / (2 * q)
	wd := w * math.Sqrt(1-zeta*zeta)
	ramp := func(t float64) float64 { // response to a ramp of slope one that begins at 0
		if t < 0 {
			return 0
		}
		if hz == 0 {
			return t
		}
		e := math.Exp(-zeta * w * t)
		return t - 2*zeta/w + e*(2*zeta/w*math.Cos(wd*t)+(2*zeta*zeta-1)/wd*math.Sin(wd*t))
	}
	sum := 0.0 // close the cycle: slopes add up to zero over a turn with the last corner
	for _, c := range corners {
		sum += c[1]
	}
	corners = append(corners, [2]float64{.05, -sum})
	n := int(2 * turn * slow)
	for range pairs {
		s := Stretch{X: make([]float64, n)}
		late := .002 * rng.NormFloat64() // valves do not open at the same angle every turn
		for i := range s.X {
			at := float64(i)/slow/turn + 1 // turns
			for _, c := range corners {
				for r := 0.; r <= 3; r++ {
					s.X[i] += c[1] * ramp((at-r-c[0]-late)*turn) / turn
				}
			}
			s.X[i] += noise * rng.NormFloat64()
		}
		for r := range 2 {
			s.Opened = append(s.Opened, (float64(r)+.14+late)*turn*slow, (float64(r)+.84+late)*turn*slow)
		}
		list = append(list, s)
	}
	return list
}

// The response is known in closed form (any textbook on vibration: a ramp on a damped mass and spring).
func TestClosedForm(t *testing.T) {
	for i, c := range []struct{ rpm, hz, q float64 }{{600, 500, 6}, {600, 900, 12}, {1000, 700, 9}, {375, 450, 15}} {
		f := Find(slow, bell(c.rpm, c.hz, c.q, 1e-4, 12, uint64(i)))
		if !f.Valid() {
			t.Errorf("%+v: %s", c, f.Reason)
			continue
		}
		t.Logf("%+v: %.1f ±%.1f Hz, Q %.2f ±%.1f, fall %.2f", c, f.Hz, f.HzU, f.Q, f.QU, f.Fall)
		if math.Abs(f.Hz-c.hz) > f.HzU || math.Abs(f.Q-c.q) > f.QU {
			t.Errorf("%+v: %.1f ±%.1f Hz, Q %.2f ±%.2f", c, f.Hz, f.HzU, f.Q, f.QU)
		}
		if orders := c.hz / c.rpm * 60; math.Abs(f.Orders/orders-1) > .02 {
			t.Errorf("%.1f times the shaft speed, want %.1f", f.Orders, orders)
		}
	}
	for i, rpm := range []float64{375, 600, 1000} {
		if f := Find(slow, bell(rpm, 0, 1, 1e-4, 12, uint64(i))); f.Valid() || !strings.Contains(f.Reason, "no resonance") {
			t.Errorf("%g/min without a passage: %.0f Hz, Q %.1f, reason %q", rpm, f.Hz, f.Q, f.Reason)
		}
	}
}

func TestRefuses(t *testing.T) {
	good := bell(600, 900, 9, 1e-4, 10, 1)
	silent := make([]Stretch, 10)
	for i := range silent {
		silent[i].X = make([]float64, 4000)
	}
	broken := append([]Stretch(nil), good...)
	for i := range 5 {
		broken[i] = Stretch{X: append([]float64(nil), good[i].X...)}
		broken[i].X[100] = math.NaN()
	}
	var deaf []Stretch // nobody knows when the valves opened
	for _, s := range good {
		deaf = append(deaf, Stretch{X: s.X})
	}
	for name, c := range map[string]struct {
		rate float64
		list []Stretch
		why  string
	}{
		"nothing":     {slow, nil, "0 stretches"},
		"too few":     {slow, good[:LeastStretches-1], "7 stretches"},
		"silent":      {slow, silent, "no resonance"},
		"broken":      {slow, broken, "5 stretches"},
		"no openings": {slow, deaf, "does not ring"},
		"low rate":    {600, good, "leave no room"},
		"rate":        {0, good, "rate"},
	} {
		f := Find(c.rate, c.list)
		if f.Valid() || !strings.Contains(f.Reason, c.why) || !math.IsNaN(f.Hz) || !math.IsNaN(f.Q) {
			t.Errorf("%s: %.0f Hz, reason %q, want %q", name, f.Hz, f.Reason, c.why)
		}
	}
}

// Neither the unit nor the zero of the transducer matters, and the same samples give the same answer.
func TestUnitAndZeroDoNotMatter(t *testing.T) {
	list := bell(600, 800, 8, 1e-4, 8, 3)
	want := Find(slow, list)
	if !want.Valid() || !reflect.DeepEqual(want, Find(slow, list)) {
		t.Fatalf("%+v twice", want)
	}
	for _, c := range [][2]float64{{1e-4, 0}, {8e3, -4}, {1, 5}, {-3, 1}} {
		gain, zero := c[0], c[1]
		other := make([]Stretch, len(list))
		for i, s := range list {
			other[i].Opened = s.Opened
			for _, v := range s.X {
				other[i].X = append(other[i].X, gain*(v+zero))
			}
		}
		got := Find(slow, other)
		if math.Abs(got.Hz/want.Hz-1) > 1e-3 || math.Abs(got.Q/want.Q-1) > 1e-2 {
			t.Errorf("gain %g, zero %g: %.2f Hz Q %.3f, want %.2f and %.3f", gain, zero, got.Hz, got.Q, want.Hz, want.Q)
		}
	}
}
