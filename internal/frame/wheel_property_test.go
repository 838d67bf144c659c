package frame

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

var someWheels = []Wheel{{Teeth: 60, Missing: 2}, {Teeth: 36, Missing: 1}, {Teeth: 36, Missing: 2, Also: []int{17}}, {Teeth: 12, Extra: true}, {Teeth: 8, Missing: 1}}

// roughTeeth is a wheel's signal with everything that can go wrong in it.
func roughTeeth(t *rapid.T) (Config, []acq.Block) {
	s := usualCogs()
	s.wheel = rapid.SampledFrom(someWheels).Draw(t, "wheel")
	s.rate = rapid.SampledFrom([]float64{10000, 25600}).Draw(t, "rate")
	s.rpm = rapid.Float64Range(100, 1200).Draw(t, "rpm")
	s.seconds = 8000 / s.rate
	s.ramp = rapid.Float64Range(-0.3, 0.3).Draw(t, "ramp")
	s.ripple = rapid.Float64Range(0, 0.1).Draw(t, "ripple")
	s.noise = rapid.Float64Range(0, 1500).Draw(t, "noise")
	s.coil = rapid.Bool().Draw(t, "coil")
	r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
	s.seed = r.Uint64()
	bad, n := r.Float64()*0.1, s.wheel.Marks()
	scale := make([]float64, 100*n)
	for i := range scale {
		if scale[i] = 1; r.Float64() < bad {
			scale[i] = 1.2 * r.Float64()
		}
	}
	s.scale = func(turn, mark int) float64 { return scale[((turn*n+mark)%len(scale)+len(scale))%len(scale)] }
	at, often := r.Float64()*float64(s.wheel.Teeth), 1+r.IntN(9)
	s.extra = bumpAt(at, at+0.3, float64(s.wheel.Teeth), s.height*2*r.Float64(), func(k int) bool { return k%often == 0 })
	x := s.signal()
	var blocks []acq.Block
	seq := int64(r.IntN(1000))
	for from := 0; from < len(x); {
		k := min(len(x)-from, 3000+r.IntN(9000))
		lost := int64(0)
		if from > 0 {
			lost = int64(r.IntN(2)) * int64(1+r.IntN(3000))
		}
		seq += lost
		blocks = append(blocks, acq.Block{Seq0: seq, N: k, Lost: lost, Counts: [][]int32{x[from : from+k]}})
		seq += int64(k)
		from += k
	}
	cfg := s.config()
	cfg.MaxRPM, cfg.Edge = 1400, Edge(r.IntN(2))
	if cfg.Auto = r.IntN(3) > 0; !cfg.Auto {
		cfg.Threshold = 200 + s.height/2
	}
	if s.rate < 20000 && s.wheel.Teeth == 60 {
		cfg.MaxRPM = 1300
	}
	return cfg, blocks
}

func TestBlockCutsDoNotMatterToTeeth(t *testing.T) {
	total := 0
	rapid.Check(t, func(t *rapid.T) {
		cfg, blocks := roughTeeth(t)
		want, st := frames(t, cfg, blocks)
		total += len(want)
		for i, f := range want {
			last := f.Mark0
			for k, m := range f.Inner {
				if !math.IsNaN(m) && !(m > last && m < f.Mark1) {
					t.Fatalf("frame %d: inner mark %d at %v after %v, before %v", i, k, m, last, f.Mark1)
				} else if !math.IsNaN(m) {
					last = m
				}
			}
		}
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "cuts"), 2))
		longest := 60 + r.IntN(4000)
		if r.IntN(8) == 0 {
			longest = 1 + r.IntN(20)
		}
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
		for _, s := range []*Status{&st, &st2} {
			if math.IsNaN(s.Noise) {
				s.Noise = 0
			}
			if math.IsNaN(s.RPM) {
				s.RPM = 0
			}
			if math.IsNaN(s.Height) {
				s.Height = 0
			}
		}
		if st != st2 {
			t.Fatalf("status %+v, in one piece %+v", st2, st)
		}
	})
	if total == 0 {
		t.Error("no frame in all")
	}
}

func TestNothingIsAllocatedPerToothedTurn(t *testing.T) {
	s := usualCogs()
	x := s.signal()[:2560*20] // whole turns, to go round and round
	a, err := New(s.config())
	if err != nil {
		t.Fatal(err)
	}
	var b acq.Block
	views := make([][][]int32, 0, 100)
	for i := 0; i < len(x); i += 512 {
		views = append(views, [][]int32{x[i : i+512]})
	}
	var seq int64
	n := 0
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

func FuzzTeeth(f *testing.F) {
	f.Add([]byte{0, 10, 0, 0, 0, 0, 255, 127, 255, 127, 0, 0}, uint8(1), uint16(0))
	f.Add([]byte("\x00\x00\x00\x00\x90\x40\x90\x40\x00\x00\x00\x00\x90\x40\x90\x40\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00"), uint8(60), uint16(700))
	tooth := []byte{0, 0, 0, 0, 0, 32, 0, 32}
	var wheel []byte
	for range 7 {
		wheel = append(wheel, tooth...)
	}
	wheel = append(wheel, 0, 0, 0, 0, 0, 0, 0, 0)
	f.Add(wheel, uint8(50), uint16(9))
	f.Add(append(wheel, tooth...), uint8(50), uint16(90))
	f.Fuzz(func(t *testing.T, raw []byte, repeat uint8, hole uint16) {
		var x []int32
		for range min(int(repeat), 60) {
			for i := 0; i+1 < len(raw) && i < 400; i += 2 {
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
			{Rate: 2000, Inputs: 1, Auto: true, MinRPM: 200, Edge: Edge(repeat % 2), Wheel: Wheel{Teeth: 8, Missing: 1}},
			{Rate: 2000, Inputs: 1, Threshold: 1000, Hysteresis: float64(hole), MinRPM: 200, Edge: Edge(repeat % 2), Wheel: Wheel{Teeth: 6, Extra: true}},
		} {
			frames(t, cfg, []acq.Block{b, c}) // checks what must hold for every stream
		}
	})
}

func BenchmarkTeeth(b *testing.B) {
	s := usualCogs()
	x := s.signal()
	counts := make([][]int32, 17)
	for i := range counts {
		counts[i] = x
	}
	blocks := acqtest.Cut(acq.Block{N: len(x), Counts: counts}, func(int) int { return 512 })
	cfg := s.config()
	cfg.Inputs = 17
	b.ReportAllocs()
	for b.Loop() {
		a, err := New(cfg)
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
