package model

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// TestNozzle compares the table with the nozzle formula and its slope with differences.
func TestNozzle(t *testing.T) {
	for _, k := range []float64{1.15, 1.27, 1.40, 1.66} {
		n := newNozzle(k)
		for _, d := range []float64{0.001, 0.003, 0.01, 0.05, 0.2, 0.4, 0.44} {
			r := 1 - d
			if d > n.choke {
				continue
			}
			want := math.Sqrt(2*k/(k-1)*(math.Pow(r, 2/k)-math.Pow(r, (k+1)/k))) * math.Sqrt(d/(d+nearEqual))
			got, slope := n.at(d)
			within(t, "ψ", got, want, 2e-6)
			up, _ := n.at(d + 1e-5)
			down, _ := n.at(d - 1e-5)
			within(t, "ψ'", slope, (up-down)/2e-5, 2e-3*math.Abs(slope)+1e-3)
		}
	}
	// Choking ratio 0.551 for k = 1.27, and the choked flow √k·(2/(k+1))^((k+1)/(2(k−1))) (any gas-dynamics text).
	n := newNozzle(1.27)
	within(t, "choking ratio", 1-n.choke, 0.551, 0.0005)
	full := math.Sqrt(1.27) * math.Pow(2/2.27, 2.27/0.54)
	within(t, "choked ψ", n.full/math.Sqrt(n.choke/(n.choke+nearEqual)), full, 1e-6)
}

// TestFlowTurns: flow runs down the pressure, in both senses, and its slope to the cylinder's pressure is never positive.
func TestFlowTurns(t *testing.T) {
	n := newNozzle(1.3)
	rapid.Check(t, func(rt *rapid.T) {
		p := rapid.Float64Range(1e5, 1e7).Draw(rt, "p")
		l := rapid.Float64Range(1e5, 1e7).Draw(rt, "line")
		in, slope := n.flow(p, 400, l, 380)
		if (p > l && in >= 0) || (p < l && in <= 0) || slope > 0 {
			rt.Fatalf("flow %g, slope %g from cylinder %g to line %g", in, slope, p, l)
		}
	})
}

// TestJetEnergy compares the series with the closed form.
func TestJetEnergy(t *testing.T) {
	for _, k := range []float64{1.2, 1.3, 1.4} {
		g := &Gas{R: 500, K: k}
		for _, r := range []float64{1.02, 1.2, 1.8, 2.5, 3.9} {
			want := 2 * k / (k - 1) * 500 * 320 * (1 - math.Pow(1/r, (k-1)/k))
			within(t, "jet speed²", jetEnergy(g, r, 1, 320), want, 0.02*want)
		}
	}
}

func TestPowk(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		r := rapid.Float64Range(0.9, 1.1).Draw(rt, "ratio")
		k := rapid.Float64Range(1, 1.7).Draw(rt, "k")
		if got, want := powk(r, k), math.Pow(r, k); math.Abs(got-want) > 1e-10 {
			rt.Fatalf("%g^%g = %.15g, want %.15g", r, k, got, want)
		}
	})
}

// TestRelax: against the exponential in its exact form.
func TestRelax(t *testing.T) {
	for _, z := range []float64{0, 1e-9, 1e-4, 0.0099, 0.0101, 0.1, 0.2999, 0.3001, 2, 50} {
		end, mean := relax(z)
		want, mid := 1.0, 0.5
		if z > 0 {
			want = -math.Expm1(-z) / z
			mid = (math.Expm1(-z) + z) / (z * z)
		}
		within(t, "end", end, want, 1e-10)
		if z > 1e-4 { // below, the exact form loses its digits
			within(t, "mean", mean, mid, 1e-9)
		}
	}
}
