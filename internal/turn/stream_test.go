package turn

import (
	"math"
	"reflect"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/frame"

	"pgregory.net/rapid"
)

// The line's first two stages together: however the samples are cut into blocks, the turns are the same bits, and the
// pressure lies at the angle where it was put.
func TestBlocksDoNotShow(t *testing.T) {
	const rate, rpm, dead = 20000, 900, 123.0
	s := newShaft(rate, 1.05, ramp(rpm, 0.05), nil, 1)
	counts := make([][]int32, 3)
	for n, th := range s.theta {
		after := math.Mod(th+360, 360) // a pulse of 12°, its edge half a degree long, mid-level at the mark
		level := math.Max(0, math.Min(1, math.Min(after+0.25, 12-after)/0.5))
		if after > 350 {
			level = math.Max(0, (after-360+0.25)/0.5)
		}
		counts[0] = append(counts[0], int32(20000*level))
		counts[1] = append(counts[1], int32(1e6+4e5*math.Cos((th-dead)*math.Pi/180)))
		counts[2] = append(counts[2], int32(1e5*math.Sin(float64(n)*float64(n)*0.1)))
	}
	feed := func(t interface{ Fatal(...any) }, size func() int) []*Turn {
		asm, err := frame.New(frame.Config{Rate: rate, Inputs: 3, Auto: true})
		if err != nil {
			t.Fatal(err)
		}
		conv, err := New(Config{Rate: rate, ImpactBand: [2]float64{2000, 8000}, Throws: []ThrowConfig{{DeadCentreDeg: dead,
			Pressure: [2]Channel{{Input: 1, Gain: 1}, None()}, Accel: []Channel{{Input: 2, Gain: 1e-3}}}}})
		if err != nil {
			t.Fatal(err)
		}
		var out []*Turn
		keep := func(t *Turn) { out = append(out, t.Clone()) }
		add := func(f *frame.Frame) { conv.Add(f, keep) }
		for i := 0; i < len(counts[0]); {
			j := min(i+size(), len(counts[0]))
			b := acq.Block{Seq0: int64(i), N: j - i}
			for _, c := range counts {
				b.Counts = append(b.Counts, c[i:j])
			}
			if err := asm.Add(&b, add); err != nil {
				t.Fatal(err)
			}
			i = j
		}
		asm.Flush(add)
		conv.Flush(keep)
		return out
	}
	whole := feed(t, func() int { return len(counts[0]) })
	valid := 0
	for i, turn := range whole {
		if i > 0 && turn.Number != whole[i-1].Number+1 {
			t.Errorf("turn %d after %d", turn.Number, whole[i-1].Number)
		}
		for _, th := range turn.Throws {
			valid++
			for j, p := range th.P[0] {
				deg := th.Grid.At(j)
				// 14e-6 is half of (0.25°·π/180)², what the kernel takes from order one, 0.4 Pa here; 1 is the code
				if want := 1e6 + 4e5*math.Cos(deg*math.Pi/180); math.Abs(p-want) > 4e5*0.01*math.Pi/180+4e5*14e-6+1 {
					t.Fatalf("turn %d at %g°: %.1f Pa, want %.1f within 0.01°", turn.Number, deg, p, want)
				}
			}
		}
	}
	if valid < 5 {
		t.Fatalf("%d valid turns of %d", valid, len(whole))
	}
	rapid.Check(t, func(rt *rapid.T) {
		most := rapid.IntRange(50, 6000).Draw(rt, "most")
		sizes := rapid.SliceOfN(rapid.IntRange(1, most), 1, 20).Draw(rt, "sizes")
		k := 0
		got := feed(rt, func() int { k++; return sizes[k%len(sizes)] + most/10 })
		if len(got) != len(whole) {
			rt.Fatalf("%d turns, want %d", len(got), len(whole))
		}
		for i := range got {
			if got[i].Reason != whole[i].Reason || got[i].Valid() && !reflect.DeepEqual(got[i], whole[i]) {
				rt.Fatalf("turn %d differs (%q, %q)", whole[i].Number, got[i].Reason, whole[i].Reason)
			}
		}
	})
}
