package dsp_test

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/dsp"
)

// Closed form: a sine of amplitude A on bin k under a periodic Hann window has the power A²/2 over three bins, split
// 1/6, 2/3, 1/6, and nothing elsewhere (Harris, Proc. IEEE 66 (1978) 51: the window's transform is three lines).
func TestWelchOfASine(t *testing.T) {
	for _, n := range []int{8, 480, 512, 2048, 3750, 4096} {
		rate, k, amp := 2560.0, n/8+1, 3.0
		w, err := dsp.NewWelch(rate, n)
		if err != nil {
			t.Fatal(err)
		}
		x := make([]float64, 3*n) // five segments, each a whole number of periods but for the half overlap's sign
		for i := range x {
			x[i] = 7 + amp*math.Sin(2*math.Pi*float64(k)*float64(i)/float64(n)+0.4)
		}
		p := make([]float64, w.Bins())
		if m := w.PSD(p, x); m != 5 {
			t.Fatalf("n %d: %d segments, want 5", n, m)
		}
		for i, v := range p {
			want := 0.0
			switch i - k {
			case -1, 1:
				want = amp * amp / 2 / 6
			case 0:
				want = amp * amp / 2 * 2 / 3
			}
			if got := v * w.Step(); n > 8 && math.Abs(got-want) > 1e-10 { // at 8 the line's image folds back onto it
				t.Fatalf("n %d bin %d: power %.12g, want %.12g", n, i, got, want)
			}
		}
	}
}

// Closed form: an impulse has a flat spectrum, half of it in the two end bins; its power is that of the windowed sample.
func TestWelchOfAnImpulse(t *testing.T) {
	const n, rate = 600, 1000.0
	w, err := dsp.NewWelch(rate, n)
	if err != nil {
		t.Fatal(err)
	}
	x := make([]float64, n)
	x[n/2], x[n/2-1] = 1, -1 // mean 0; |X|² = |w0 − w1 e^{jω}|²
	p := make([]float64, w.Bins())
	w.PSD(p, x)
	hann := func(i int) float64 { return math.Pow(math.Sin(math.Pi*float64(i)/n), 2) }
	for i, v := range p {
		om := 2 * math.Pi * float64(i) / n
		a, b := hann(n/2), hann(n/2-1)
		want := (a*a + b*b - 2*a*b*math.Cos(om)) / (rate * 3 * n / 8) * 2
		if i == 0 || i == n/2 {
			want /= 2
		}
		if math.Abs(v-want) > 1e-14 {
			t.Fatalf("bin %d: %.15g, want %.15g", i, v, want)
		}
	}
}

// Parseval: the sum over all bins is the mean square of the windowed segment over the window's.
func TestWelchKeepsPower(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.SampledFrom([]int{8, 30, 100, 256}).Draw(rt, "n")
		x := rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), n, n).Draw(rt, "x")
		w, err := dsp.NewWelch(10, n)
		if err != nil {
			rt.Fatal(err)
		}
		var mean, want, norm, got float64
		for _, v := range x {
			mean += v / float64(n)
		}
		for i, v := range x {
			h := math.Pow(math.Sin(math.Pi*float64(i)/float64(n)), 2)
			want += (v - mean) * (v - mean) * h * h
			norm += h * h
		}
		p := make([]float64, w.Bins())
		w.PSD(p, x)
		for _, v := range p {
			got += v * w.Step()
		}
		if want /= norm; math.Abs(got-want) > 1e-9*(want+1) {
			rt.Fatalf("power %g, want %g", got, want)
		}
	})
}

func TestWelchRefuses(t *testing.T) {
	for _, n := range []int{-1, 0, 7, 15, 14, 4099, 10007} {
		if _, err := dsp.NewWelch(1, n); err == nil {
			t.Errorf("a segment of %d samples is taken", n)
		}
	}
	if _, err := dsp.NewWelch(0, 8); err == nil {
		t.Error("a rate of 0 is taken")
	}
	for in, want := range map[int]int{-3: 1, 1: 1, 7: 8, 11: 12, 2048: 2048, 2049: 2160, 4099: 4320} {
		if got := dsp.FastLength(in); got != want {
			t.Errorf("FastLength(%d) = %d, want %d", in, got, want)
		}
	}
	w, _ := dsp.NewWelch(1, 8)
	if m := w.PSD(make([]float64, w.Bins()), make([]float64, 7)); m != 0 {
		t.Error("a spectrum out of too few samples")
	}
}
