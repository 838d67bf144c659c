package frame

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// shaft makes a phase signal whose marks are known in closed form.
type shaft struct {
	rate    float64 // Hz
	seconds float64
	rpm     float64 // at time 0
	ramp    float64 // change of speed per second, as a fraction of rpm; turns(t) = rpm/60·(t + ramp·t²/2)
	phase   float64 // turns at time 0, <= 0: the first mark comes when it has been made up
	width   float64 // degrees of pulse at half height
	edge    float64 // degrees from foot to top
	base    float64 // codes
	height  float64 // codes; negative: a notch
	noise   float64 // codes RMS
	seed    uint64
	scale   func(turn int) float64      // height of pulse number n, relative; nil: 1
	extra   func(turns float64) float64 // codes added, by shaft position; nil: none
}

func usual() shaft {
	return shaft{rate: 25600, seconds: 6, rpm: 600, phase: -0.3, width: 8, edge: 2, base: 200, height: 10000, noise: 40}
}

func (s shaft) turns(t float64) float64 { return s.phase + s.rpm/60*(t+s.ramp*t*t/2) }

// markAt gives the sample position of the mark that opens turn n: the middle of the rising flank.
func (s shaft) markAt(n int) float64 {
	need := (float64(n) - s.phase) * 60 / s.rpm
	if s.ramp == 0 {
		return need * s.rate
	}
	return (math.Sqrt(1+2*s.ramp*need) - 1) / s.ramp * s.rate
}

// pulseShape is a trapezoid of height 1 that rises through a half at 0 degrees and falls through it at width.
func (s shaft) pulseShape(deg float64) float64 {
	if deg > 180 {
		deg -= 360
	}
	up, down := 0.5+deg/s.edge, 0.5+(s.width-deg)/s.edge
	return min(max(min(up, down), 0), 1)
}

func (s shaft) signal() []int32 {
	r := rand.New(rand.NewPCG(s.seed, 7))
	x := make([]int32, int(s.rate*s.seconds))
	for i := range x {
		n := s.turns(float64(i) / s.rate)
		whole := math.Round(n) // the nearest mark's number, so that the flank before it belongs to it
		if n-whole < -s.edge/360 {
			whole--
		}
		h := s.height
		if s.scale != nil {
			h *= s.scale(int(whole))
		}
		v := s.base + h*s.pulseShape((n-whole)*360) + s.noise*r.NormFloat64()
		if s.extra != nil {
			v += s.extra(n)
		}
		x[i] = int32(math.Round(v))
	}
	return x
}

// copied is a frame that lives on, with its samples.
type copied struct {
	Frame
}

func keep(f *Frame) copied {
	c := copied{*f}
	c.Inner = append([]float64(nil), f.Inner...)
	c.Counts = make([][]int32, len(f.Counts))
	for i, x := range f.Counts {
		c.Counts[i] = append([]int32(nil), x...)
	}
	return c
}

func config(s shaft) Config { return Config{Rate: s.rate, Inputs: 1, Auto: true} }

type fataler interface {
	Helper()
	Fatal(...any)
	Fatalf(string, ...any)
}

// frames runs blocks through a fresh assembler and checks what must hold for every stream.
func frames(t fataler, cfg Config, blocks []acq.Block) ([]copied, Status) {
	t.Helper()
	a, err := New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	a.ring.tight = len(blocks) > 100
	var out []copied
	var last *Frame
	emit := func(f *Frame) {
		if f == last {
			t.Fatal("a frame was reused within one Add")
		}
		last = f
		out = append(out, keep(f))
	}
	for i := range blocks {
		last = nil
		if err := a.Add(&blocks[i], emit); err != nil {
			t.Fatal(err)
		}
	}
	last = nil
	st := a.Status()
	a.Flush(emit)
	st.Frames, st.LetGo = a.Status().Frames, a.Status().LetGo
	for i, f := range out {
		n := int64(math.Ceil(f.Mark1)) - int64(math.Floor(f.Mark0))
		if !(f.Mark1 > f.Mark0) || f.Seq0 != int64(math.Floor(f.Mark0)) {
			t.Fatalf("frame %d: marks %v, %v, first sample %d", i, f.Mark0, f.Mark1, f.Seq0)
		}
		for c, x := range f.Counts {
			if int64(len(x)) != n {
				t.Fatalf("frame %d: input %d has %d samples, want %d", i, c, len(x), n)
			}
		}
		if i == 0 {
			continue
		}
		p := out[i-1]
		if f.Turn <= p.Turn || f.Mark0 < p.Mark1 {
			t.Fatalf("frame %d: turn %d at %v after turn %d up to %v", i, f.Turn, f.Mark0, p.Turn, p.Mark1)
		}
		if f.Mark0 != p.Mark1 && f.Good() {
			t.Fatalf("frame %d (turn %d) is called good but does not follow on its neighbour", i, f.Turn)
		}
	}
	return out, st
}

func oneBlock(x ...[]int32) []acq.Block { return []acq.Block{{N: len(x[0]), Counts: x}} }

func cutUp(x []int32, n int) []acq.Block {
	return acqtest.Cut(oneBlock(x)[0], func(int) int { return n })
}

// marksRight checks that every good frame lies between two neighbouring true marks, to within tol degrees, and gives
// the number of good frames.
func marksRight(t *testing.T, s shaft, got []copied, tol float64) int {
	t.Helper()
	good := 0
	for _, f := range got {
		if !f.Good() {
			continue
		}
		good++
		n := math.Round(s.turns(f.Mark0 / s.rate))
		for k, m := range []float64{f.Mark0, f.Mark1} {
			want := s.markAt(int(n) + k)
			deg := (m - want) * 360 / (s.markAt(int(n)+1) - s.markAt(int(n)))
			if math.Abs(deg) > tol {
				t.Errorf("turn %d: mark %d is off by %.3f° (at %.2f, want %.2f)", f.Turn, k, deg, m, want)
			}
		}
	}
	return good
}

// whole gives the number of whole turns in the signal.
func (s shaft) whole() int { return int(math.Floor(s.turns(s.seconds))) }
