package frame

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// rough is a signal with everything that can go wrong in it, and a second input to carry along.
func rough(t *rapid.T) (Config, []acq.Block) {
	s := usual()
	s.rate = rapid.SampledFrom([]float64{5000, 10000, 25600}).Draw(t, "rate")
	s.rpm = rapid.Float64Range(100, 1800).Draw(t, "rpm")
	s.seconds = 12000 / s.rate
	s.ramp = rapid.Float64Range(-0.1, 0.1).Draw(t, "ramp")
	s.width = rapid.Float64Range(3, 200).Draw(t, "width")
	s.noise = rapid.Float64Range(0, 1500).Draw(t, "noise")
	if rapid.Bool().Draw(t, "notch") {
		s.height = -s.height
	}
	r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
	s.seed = r.Uint64()
	scale := map[int]float64{}
	for range rapid.IntRange(0, 12).Draw(t, "bad marks") {
		scale[r.IntN(100)] = r.Float64() * 1.2
	}
	s.scale = func(n int) float64 {
		if v, ok := scale[n]; ok {
			return v
		}
		return 1
	}
	at, often := 360*r.Float64(), 1+r.IntN(9)
	s.extra = bump(at, 5, s.height*2*r.Float64(), func(n int) bool { return n%often == 0 })
	x := s.signal()
	y := make([]int32, len(x))
	for i := range y {
		y[i] = int32(i)
	}
	var blocks []acq.Block
	seq := int64(r.IntN(1000))
	for from := 0; from < len(x); {
		n := min(len(x)-from, 3000+r.IntN(6000))
		lost := int64(0)
		if from > 0 {
			lost = int64(r.IntN(2)) * int64(1+r.IntN(3000))
		}
		seq += lost
		blocks = append(blocks, acq.Block{Seq0: seq, N: n, Lost: lost, Counts: [][]int32{y[from : from+n], x[from : from+n]}})
		seq += int64(n)
		from += n
	}
	cfg := Config{Rate: s.rate, Inputs: 2, Channel: 1, Auto: rapid.Bool().Draw(t, "auto"), Threshold: s.base + s.height/2,
		Edge: Edge(r.IntN(2)), MaxRPM: 2000}
	return cfg, blocks
}

func same(a, b copied) bool {
	if a.Turn != b.Turn || a.Seq0 != b.Seq0 || a.Q != b.Q || len(a.Counts) != len(b.Counts) ||
		math.Float64bits(a.Mark0) != math.Float64bits(b.Mark0) || math.Float64bits(a.Mark1) != math.Float64bits(b.Mark1) {
		return false
	}
	if len(a.Inner) != len(b.Inner) {
		return false
	}
	for i, v := range a.Inner {
		if math.Float64bits(v) != math.Float64bits(b.Inner[i]) {
			return false
		}
	}
	for c, x := range a.Counts {
		if len(x) != len(b.Counts[c]) {
			return false
		}
		for i, v := range x {
			if b.Counts[c][i] != v {
				return false
			}
		}
	}
	return true
}

func TestBlockCutsDoNotMatter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		cfg, blocks := rough(t)
		want, st := frames(t, cfg, blocks)
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "cuts"), 2))
		longest := 1 + r.IntN(4000)
		var pieces []acq.Block
		for _, b := range blocks {
			pieces = append(pieces, acqtest.Cut(b, func(int) int { return 1 + r.IntN(longest) })...)
		}
		got, st2 := frames(t, cfg, pieces)
		if len(got) != len(want) {
			t.Fatalf("%d frames, in one piece %d", len(got), len(want))
		}
		for i := range got {
			if !same(got[i], want[i]) {
				t.Fatalf("frame %d: turn %d %v..%v %b, in one piece turn %d %v..%v %b", i, got[i].Turn, got[i].Mark0, got[i].Mark1,
					got[i].Q, want[i].Turn, want[i].Mark0, want[i].Mark1, want[i].Q)
			}
		}
		st.RPM, st2.RPM = math.Round(1e6*st.RPM), math.Round(1e6*st2.RPM)
		if math.IsNaN(st.RPM) && math.IsNaN(st2.RPM) {
			st.RPM, st2.RPM = 0, 0
		}
		if math.IsNaN(st.Height) && math.IsNaN(st2.Height) {
			st.Height, st2.Height, st.Noise, st2.Noise = 0, 0, 0, 0
		}
		if st != st2 {
			t.Fatalf("status %+v, in one piece %+v", st2, st)
		}
	})
}

func TestFramesHoldTheSamplesAsTheyCame(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		cfg, blocks := rough(t)
		all := acqtest.Join(blocks)
		got, _ := frames(t, cfg, blocks)
		for _, f := range got {
			for k := range f.Counts[0] {
				i, ok := slices.BinarySearch(all.Seq, f.Seq0+int64(k))
				if !ok { // lost: must be said
					if f.Q&Gap == 0 {
						t.Fatalf("turn %d holds lost samples and is not marked", f.Turn)
					}
					continue
				}
				if f.Counts[0][k] != all.Counts[0][i] || f.Counts[1][k] != all.Counts[1][i] {
					t.Fatalf("turn %d: sample %d is not what came", f.Turn, f.Seq0+int64(k))
				}
			}
		}
	})
}

func TestNothingIsAllocatedPerTurn(t *testing.T) {
	s := usual()
	s.seconds = 3
	x := s.signal()
	a, err := New(config(s))
	if err != nil {
		t.Fatal(err)
	}
	x = x[:2560*20] // whole turns, to go round and round
	views := make([][][]int32, 0, 100)
	for i := 0; i < len(x); i += 512 {
		views = append(views, [][]int32{x[i : i+512]})
	}
	var seq int64
	n := 0
	var b acq.Block
	round := func() {
		for _, v := range views {
			b = acq.Block{Seq0: seq, N: 512, Counts: v}
			seq += 512
			if err := a.Add(&b, func(*Frame) { n++ }); err != nil {
				t.Fatal(err)
			}
		}
	}
	for range 5 {
		round()
	}
	n = 0
	if got := testing.AllocsPerRun(5, round); got > 0 {
		t.Errorf("%v allocations in 20 turns", got)
	}
	if n != 6*20 {
		t.Errorf("%d turns, want 120", n)
	}
}

func FuzzAssembler(f *testing.F) {
	f.Add([]byte{0, 10, 0, 0, 0, 0, 255, 255, 255, 0, 0, 0}, uint8(1), uint16(0))
	f.Add([]byte("\x00\x00\x00\x00\x00\x00\x00\x00\x90\x90\x90\x00\x00\x00"), uint8(40), uint16(700))
	f.Add([]byte{128, 127, 0, 128, 1, 2, 3, 128, 127, 0, 128, 1, 2, 3}, uint8(3), uint16(9))
	f.Fuzz(func(t *testing.T, raw []byte, repeat uint8, hole uint16) {
		var x []int32
		for range min(int(repeat), 60) {
			for i := 0; i+1 < len(raw) && i < 400; i++ {
				x = append(x, int32(int16(binary.LittleEndian.Uint16(raw[i:]))))
			}
		}
		if len(x) < 2 {
			return
		}
		half := len(x) / 2
		b := acq.Block{N: half, Counts: [][]int32{x[:half]}}
		c := acq.Block{Seq0: int64(half) + int64(hole), Lost: int64(hole), N: len(x) - half, Counts: [][]int32{x[half:]}}
		for _, cfg := range []Config{
			{Rate: 2000, Inputs: 1, Auto: true, MinRPM: 200, Edge: Edge(repeat % 2)},
			{Rate: 2000, Inputs: 1, Threshold: 1000, Hysteresis: float64(hole), MinRPM: 200, Edge: Edge(repeat % 2)},
		} {
			frames(t, cfg, []acq.Block{b, c}) // checks what must hold for every stream
		}
	})
}

func BenchmarkAdd(b *testing.B) {
	s := usual()
	x := s.signal()
	counts := make([][]int32, 17)
	for i := range counts {
		counts[i] = x
	}
	blocks := acqtest.Cut(acq.Block{N: len(x), Counts: counts}, func(int) int { return 512 })
	b.ReportAllocs()
	for b.Loop() {
		a, err := New(Config{Rate: s.rate, Inputs: 17, Auto: true})
		if err != nil {
			b.Fatal(err)
		}
		for i := range blocks {
			if err := a.Add(&blocks[i], func(*Frame) {}); err != nil {
				b.Fatal(err)
			}
		}
	}
	b.ReportMetric(float64(b.N)*float64(len(x))/s.rate/b.Elapsed().Seconds(), "x-real-time")
}
