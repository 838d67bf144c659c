package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// plain is the section loop of the textbook, one sample and one section at a time: transposed direct form II.
func plain(s SOS, x []float64) []float64 {
	z := make([][2]float64, len(s))
	y := make([]float64, len(x))
	for i, v := range x {
		for k, c := range s {
			w := c.B0*v + z[k][0]
			z[k][0] = c.B1*v - c.A1*w + z[k][1]
			z[k][1] = c.B2*v - c.A2*w
			v = w
		}
		y[i] = v
	}
	return y
}

func TestFilterIsThePlainLoop(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		lo := rapid.Float64Range(100, 8000).Draw(t, "lo")
		s, err := BandPass(rapid.IntRange(1, 3).Draw(t, "order"), lo, rapid.Float64Range(lo+200, 24000).Draw(t, "hi"), 51200)
		if err != nil {
			t.Fatal(err)
		}
		x := noise(700, 20000, rapid.Uint32().Draw(t, "seed"))
		f, y, v := NewFilter(s), make([]float64, len(x)), make([]float64, len(x))
		for i := range x {
			v[i] = float64(x[i])
		}
		f.Process(y, v)
		for i, w := range plain(s, v) {
			if y[i] != w {
				t.Fatalf("sample %d: %g, plain loop %g", i, y[i], w)
			}
		}
	})
}

// noise gives n counts within ±most.
func noise(n int, most int32, seed uint32) []int32 {
	x := make([]int32, n)
	for i := range x {
		seed = seed*1664525 + 1013904223
		x[i] = int32(seed>>1)%(2*most+1) - most
	}
	return x
}

// However the stream is cut, whatever the number of channels and whichever form is taken, each band is what a Filter of
// its own makes of the channel, to the last bit.
func TestBankIsFourFilters(t *testing.T) {
	forms := map[string]bool{"chosen": hasAVX2, "plain": false}
	rapid.Check(t, func(t *rapid.T) {
		lo := rapid.Float64Range(100, 8000).Draw(t, "lo")
		f, err := BandPass(2, lo, rapid.Float64Range(lo+200, 24000).Draw(t, "hi"), 51200)
		g, err2 := BandPass(2, 9000, 20000, 51200)
		if err != nil || err2 != nil {
			t.Fatal(err, err2)
		}
		n := rapid.IntRange(1, BankChannels).Draw(t, "channels")
		long := rapid.IntRange(1, 2600).Draw(t, "samples")
		quiet := rapid.IntRange(0, long).Draw(t, "from here on silence")
		in := make([][]int32, n)
		gain, offset := make([]float64, n), make([]float64, n)
		want := [2][][]float64{make([][]float64, n), make([][]float64, n)}
		for k := range n {
			in[k] = noise(long, math.MaxInt32/2, rapid.Uint32().Draw(t, "seed"))
			gain[k] = rapid.Float64Range(-1e-2, 1e-2).Draw(t, "gain")
			offset[k] = rapid.SampledFrom([]float64{0, -0.3, 12.5}).Draw(t, "offset")
			clear(in[k][quiet:])
			x := make([]float64, long)
			for i, c := range in[k] {
				x[i] = float64(gain[k]*float64(c)) + offset[k]
			}
			for j, s := range [2]SOS{f, g} {
				want[j][k] = make([]float64, long)
				h := NewFilter(s)
				h.Settle(x[0])
				h.Process(want[j][k], x)
			}
		}
		for name, vectors := range forms {
			b, err := NewBank(f, g, gain, offset)
			if err != nil {
				t.Fatal(err)
			}
			got := [2][][]float64{make([][]float64, n), make([][]float64, n)}
			for from := 0; from < long; {
				to := min(long, from+rapid.IntRange(1, 1500).Draw(t, "block"))
				part := make([][]int32, n)
				var out [2][][]float64
				for k := range n {
					part[k] = in[k][from:to]
					for j := range out {
						got[j][k] = append(got[j][k], make([]float64, to-from)...)
						out[j] = append(out[j], got[j][k][from:])
					}
				}
				b.process(out[0], out[1], part, vectors)
				from = to
			}
			for j := range got {
				for k := range n {
					for i, w := range want[j][k] {
						if math.Float64bits(got[j][k][i]) != math.Float64bits(w) {
							t.Fatalf("%s form, band %d, channel %d, sample %d: %g, its own filter %g", name, j, k, i, got[j][k][i], w)
						}
					}
				}
			}
		}
	})
}

func TestBankBeginsAnew(t *testing.T) {
	f, err := BandPass(2, 2000, 20000, 51200)
	if err != nil {
		t.Fatal(err)
	}
	b, err := NewBank(f, f, []float64{2}, []float64{1})
	if err != nil {
		t.Fatal(err)
	}
	x := noise(100, 1000, 5)
	y, z := make([]float64, 100), make([]float64, 100)
	b.Process([][]float64{y}, [][]float64{y}, [][]int32{x})
	b.Reset()
	b.Process([][]float64{z}, [][]float64{z}, [][]int32{x})
	for i := range y {
		if y[i] != z[i] {
			t.Fatalf("sample %d: %g after Reset, %g at first", i, z[i], y[i])
		}
	}
}

func TestBankRefusals(t *testing.T) {
	band, err := BandPass(2, 2000, 20000, 51200)
	low, err2 := LowPass(4, 3000, 51200)
	if err != nil || err2 != nil {
		t.Fatal(err, err2)
	}
	one := []float64{1}
	for name, c := range map[string]struct {
		f, g         SOS
		gain, offset []float64
	}{
		"no channel":      {band, band, nil, nil},
		"five channels":   {band, band, make([]float64, 5), make([]float64, 5)},
		"gains, offsets":  {band, band, one, nil},
		"a low-pass":      {band, low, one, one},
		"a single band":   {band, nil, one, one},
		"too many stages": {append(band[:2:2], band...), band, one, one},
	} {
		if _, err := NewBank(c.f, c.g, c.gain, c.offset); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

func BenchmarkBank(b *testing.B) {
	f, err := BandPass(2, 2000, 20000, 51200)
	g, err2 := BandPass(2, 10000, 20000, 51200)
	if err != nil || err2 != nil {
		b.Fatal(err, err2)
	}
	const n = 3413
	in, y, z := make([][]int32, 4), make([][]float64, 4), make([][]float64, 4)
	for k := range in {
		in[k], y[k], z[k] = noise(n, 2000, uint32(k)), make([]float64, n), make([]float64, n)
	}
	for name, vectors := range map[string]bool{"chosen": hasAVX2, "plain": false} {
		b.Run(name, func(b *testing.B) {
			bank, err := NewBank(f, g, []float64{1, 1, 1, 1}, make([]float64, 4))
			if err != nil {
				b.Fatal(err)
			}
			b.ReportAllocs()
			for b.Loop() {
				bank.process(y, z, in, vectors)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*n*4), "ns/sample")
		})
	}
}
