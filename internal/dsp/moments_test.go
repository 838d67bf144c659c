package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The moments are those of their definitions, over every cutting into parts, and both forms give the same bits.
func TestMoments(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		most := rapid.SampledFrom([]int32{1, 3, 1000, 1 << 22, math.MaxInt32 / 2}).Draw(t, "most")
		x := noise(rapid.IntRange(2, 300).Draw(t, "samples"), most, rapid.Uint32().Draw(t, "seed"))
		for i := rapid.IntRange(0, len(x)-1).Draw(t, "stuck from"); i < rapid.IntRange(0, len(x)).Draw(t, "stuck to"); i++ {
			x[i] = x[0]
		}
		var m, plain Moments
		m.Begin(x)
		plain.Begin(x)
		var two, four, square, longest, run float64
		for from := 0; from < len(x); {
			to := min(len(x), from+rapid.IntRange(1, 90).Draw(t, "part"))
			p, q := m.Part(to), plain.part(to, false)
			if p != q {
				t.Fatalf("part from %d: %+v, plain form %+v", from, p, q)
			}
			var sum, bent float64
			least, most := x[from], x[from]
			for i := from; i < to; i++ {
				a, b, c := float64(x[i]), float64(x[max(i-1, 0)]), float64(x[max(i-2, 0)])
				sum += a - float64(x[0])
				square += (a - float64(x[0])) * (a - float64(x[0]))
				two += (a - b) * (a - b)
				four += math.Pow(a-b, 4)
				bent += (a - 2*b + c) * (a - 2*b + c)
				least, most = min(least, x[i]), max(most, x[i])
				if run++; a != b {
					run = 1
				}
				longest = max(longest, run)
			}
			if p.Sum != sum || p.Least != least || p.Most != most || math.Abs(p.Bent-bent) > 1e-12*bent {
				t.Fatalf("part from %d: %+v, want sum %g, bent %g, %d to %d", from, p, sum, bent, least, most)
			}
			from = to
		}
		if m.Longest() != int(longest) || plain.Longest() != int(longest) {
			t.Fatalf("longest run %d, plain form %d, want %g", m.Longest(), plain.Longest(), longest)
		}
		for _, c := range []struct {
			what             string
			got, plain, want float64
		}{{"square", m.Square(), plain.Square(), square}, {"two", m.Two(), plain.Two(), two}, {"four", m.Four(), plain.Four(), four}} {
			if math.Float64bits(c.got) != math.Float64bits(c.plain) || math.Abs(c.got-c.want) > 1e-12*c.want {
				t.Fatalf("%s: %.17g, plain form %.17g, want %g", c.what, c.got, c.plain, c.want)
			}
		}
	})
}

func BenchmarkMoments(b *testing.B) {
	x := noise(3413, 2000, 1)
	for name, vectors := range map[string]bool{"chosen": hasAVX2, "plain": false} {
		b.Run(name, func(b *testing.B) {
			var m Moments
			for b.Loop() {
				m.Begin(x)
				for k := range 32 {
					m.part((k+1)*len(x)/32, vectors)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(x)), "ns/sample")
		})
	}
}

// What the table says of eight counts, against counting run by run: run is how long the last count before them went on.
func TestRunsOfEight(t *testing.T) {
	for m := range 256 {
		for _, before := range []int{1, 2, 5, 40} {
			run, longest := before, before
			for i := range 8 {
				if run++; m>>i&1 == 0 {
					run = 1
				}
				longest = max(longest, run)
			}
			r := runs[m]
			end := int(r[2])
			if m == 255 {
				end += before
			}
			if got := max(before, before+int(r[0]), int(r[1])); got != longest || end != run {
				t.Fatalf("%08b after a run of %d: longest %d, last %d, want %d and %d", m, before, got, end, longest, run)
			}
		}
	}
}
