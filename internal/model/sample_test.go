package model

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/skid"
)

func newDemo(t testing.TB, s Script, o Options) *Machine {
	t.Helper()
	m, err := New(demo(), s, o)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// collect runs a machine in blocks of the given lengths (the last one repeats) and joins the counts.
func collect(m *Machine, total int, cuts []int) [][]int32 {
	out := make([][]int32, m.inputs)
	var b acq.Block
	for i := 0; total > 0; i++ {
		n := min(cuts[min(i, len(cuts)-1)], total)
		m.Fill(&b, n)
		total -= n
		for c := range out {
			out[c] = append(out[c], b.Counts[c]...)
		}
	}
	return out
}

func same(a, b [][]int32) bool { return slices.EqualFunc(a, b, slices.Equal[[]int32]) }

// TestAnyCutGivesTheSame: the samples do not depend on how they are asked for.
func TestAnyCutGivesTheSame(t *testing.T) {
	t.Parallel()
	s := Script{}.Add(0.003, 0.005, ValveLeak, "t1.he.s1", 30*MM2).Add(0.006, 0, LoadStep, "", 2).Add(0.002, 0.01, Speed, "", 800)
	const total = 500
	fresh := func() *Machine {
		m, err := New(single(), s, Options{Seed: 7})
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
	whole := collect(fresh(), total, []int{total})
	rapid.Check(t, func(rt *rapid.T) {
		cuts := rapid.SliceOfN(rapid.IntRange(1, 300), 1, 12).Draw(rt, "cuts")
		if !same(whole, collect(fresh(), total, cuts)) {
			rt.Fatalf("blocks of %v give other samples than one block", cuts)
		}
	})
}

func TestSeed(t *testing.T) {
	t.Parallel()
	a := collect(newDemo(t, Script{}, Options{Seed: 7}), 3000, []int{512})
	if !same(a, collect(newDemo(t, Script{}, Options{Seed: 7}), 3000, []int{512})) {
		t.Error("the same seed gave other samples")
	}
	b := collect(newDemo(t, Script{}, Options{Seed: 8}), 3000, []int{512})
	for c := range a {
		if slices.Equal(a[c], b[c]) {
			t.Errorf("input %d is the same under another seed", c)
		}
	}
}

// scaled gives a channel of the skid in its engineering unit.
func scaled(sk *skid.Skid, id string, counts [][]int32, bits int) []float64 {
	for _, c := range sk.Channels {
		if c.ID == id {
			g, o := c.Scale(bits)
			out := make([]float64, len(counts[c.Input]))
			for i, v := range counts[c.Input] {
				out[i] = g*float64(v) + o
			}
			return out
		}
	}
	return nil
}

// TestMark: the mid-level crossings of the phase pulse and the dead centres of the truth tell the same shaft angle.
func TestMark(t *testing.T) {
	t.Parallel()
	for _, falling := range []bool{false, true} {
		sk := demo()
		sk.Phase.Falling = falling
		sk.Phase.Ripple = []skid.Ripple{{Order: 1, Amp: 0.004, Phase: 20}, {Order: 2, Amp: 0.01, Phase: 200}}
		m, err := New(sk, Script{}, Options{Seed: 2})
		if err != nil {
			t.Fatal(err)
		}
		volts := scaled(sk, "mark", collect(m, int(0.4*m.rate), []int{4096}), 24)
		lo, hi := slices.Min(volts), slices.Max(volts)
		mid := (lo + hi) / 2
		var marks []float64
		for i := 1; i < len(volts); i++ {
			if a, b := volts[i-1], volts[i]; (a < mid && b >= mid && !falling) || (a > mid && b <= mid && falling) {
				marks = append(marks, (float64(i-1)+(mid-a)/(b-a))/m.rate)
			}
		}
		if len(marks) < 4 {
			t.Fatalf("only %d marks in 0.4 s at 740 rev/min", len(marks))
		}
		// φ = θ − Σ(a/n)·sin(nθ−p) grows evenly in time to first order in the ripple.
		even := func(deg float64) float64 {
			r := deg * math.Pi / 180
			for _, h := range sk.Phase.Ripple {
				r -= h.Amp / float64(h.Order) * (math.Sin(float64(h.Order)*r-h.Phase*math.Pi/180) + math.Sin(h.Phase*math.Pi/180))
			}
			return r / (2 * math.Pi)
		}
		checked := 0
		for _, tr := range m.Truths() {
			for i := 1; i < len(marks); i++ {
				if tr.T0 < marks[i-1] || tr.T0 >= marks[i] {
					continue
				}
				dc := sk.Throws[tr.Throw].DeadCentre
				want := marks[i-1] + even(dc)*(marks[i]-marks[i-1])
				within(t, "dead centre against mark, degrees", (tr.T0-want)*740*6, 0, 0.03)
				checked++
			}
		}
		if checked < 6 {
			t.Errorf("only %d dead centres checked", checked)
		}
	}
}

// TestImpactsAreHeard: after every hard stop impact the accelerometer rises within a millisecond, and not before it.
func TestImpactsAreHeard(t *testing.T) {
	t.Parallel()
	sk := demo()
	m, err := New(sk, Script{}, Options{Seed: 5})
	if err != nil {
		t.Fatal(err)
	}
	counts := collect(m, int(0.7*m.rate), []int{5120})
	heardCount := 0
	var all [2][]float64
	truths := m.Truths()
	for _, tr := range truths {
		for _, im := range tr.Impacts {
			all[tr.Throw] = append(all[tr.Throw], im.Time)
		}
	}
	for _, tr := range truths {
		x := scaled(sk, sk.Throws[tr.Throw].Accel[0], counts, 24)
		for _, im := range tr.Impacts {
			if !im.Stop || im.Speed < 2.5 {
				continue
			}
			quiet := true // nothing else of this throw in the 6 ms before
			for _, o := range all[tr.Throw] {
				if o < im.Time && o > im.Time-6e-3 {
					quiet = false
				}
			}
			i := int(im.Time * m.rate)
			if !quiet || i < 400 || i+60 > len(x) {
				continue
			}
			top, before := 0.0, 0.0
			for j := i + 1; j < i+60; j++ {
				top = max(top, math.Abs(x[j]-x[i]))
			}
			for j := i - 100; j <= i; j++ {
				before = max(before, math.Abs(x[j]-x[j-2]))
			}
			heardCount++
			if top < 8 || top < 3*before {
				t.Errorf("valve %s hit its stop at %.1f m/s: %.1f m/s² after, %.1f before", im.Valve, im.Speed, top, before)
			}
		}
	}
	if heardCount < 12 {
		t.Errorf("only %d isolated stop impacts in 0.7 s", heardCount)
	}
}

// TestConverter: width, rails and overload flag.
func TestConverter(t *testing.T) {
	t.Parallel()
	sk := demo()
	for i := range sk.Channels {
		if sk.Channels[i].Kind == skid.Acceleration {
			sk.Channels[i].VoltsFull = 0.1 // 1 g full scale: impacts must hit the rail
		}
	}
	m, err := New(sk, Script{}, Options{Seed: 1, Bits: 16})
	if err != nil {
		t.Fatal(err)
	}
	b := fill(m, 0.15)
	if !b.Clip || b.Note == "" {
		t.Error("an overloaded converter was not reported")
	}
	top, bottom := int32(0), int32(0)
	for _, c := range b.Counts {
		top, bottom = max(top, slices.Max(c)), min(bottom, slices.Min(c))
	}
	if top != 32767 || bottom != -32768 {
		t.Errorf("codes run from %d to %d, want the rails of 16 bits", bottom, top)
	}
	if m2 := newDemo(t, Script{}, Options{Seed: 1}); fill(m2, 0.15).Clip {
		t.Error("a healthy machine overloads its converter")
	}
}

// TestPassageRings: the gauge passage answers a sine at its own frequency Q times stronger and a slow one truly.
func TestPassageRings(t *testing.T) {
	const rate, f, q = 51200.0, 900.0, 9.0
	for _, c := range []struct{ at, want float64 }{{f, q}, {50, 1 / (1 - 50*50/(f*f))}, {2 * f, 1.0 / 3}} {
		s := passage(f, q, rate)
		top := 0.0
		for i := range 20000 {
			y := s.next(math.Sin(2 * math.Pi * c.at * float64(i) / rate))
			if i > 15000 {
				top = max(top, math.Abs(y))
			}
		}
		within(t, "passage gain", top, c.want, 0.02*c.want)
	}
}

// TestNoiseBand: unit white noise comes out of a band with unit variance and stays in it.
func TestNoiseBand(t *testing.T) {
	b := newBand(8000, 20000, 51200)
	r := stream(1, 9)
	s := 0.0
	const n = 200000
	for range n {
		y := b.next(r.NormFloat64())
		s += y * y
	}
	within(t, "variance", s/n, 1, 0.02)
}

func BenchmarkMachine(b *testing.B) {
	m := newDemo(b, Script{}, Options{Seed: 1})
	var blk acq.Block
	b.ReportAllocs()
	for b.Loop() {
		m.Fill(&blk, 5120)
	}
	b.ReportMetric(0.1*float64(b.N)/b.Elapsed().Seconds(), "x-real-time")
}
