package sensor

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
	source "lapwing/internal/acq/model"
	"lapwing/internal/frame"
	"lapwing/internal/skid"
)

// tape is a healthy recording of one throw at one duty, made once: 740 rpm, 6 s. Every case below breaks a copy of it.
var tape struct {
	once   sync.Once
	info   acq.Info
	counts [][]int32
	frames []frame.Frame // without their samples
}

const (
	tapeSeconds = 6.0
	breaks      = 2.4 // s
	mends       = 3.9
)

func recorded(t testing.TB) (*skid.Skid, acq.Info, [][]int32) {
	t.Helper()
	sk := machine(t, "biomethane-two-throw.yaml", false)
	tape.once.Do(func() {
		src, err := source.Open(sk, swing(sk, 0), source.Options{Seed: 5, BlockLen: 51200})
		if err != nil {
			t.Fatal(err)
		}
		defer src.Close()
		tape.info = src.Info()
		tape.counts = make([][]int32, tape.info.Channels)
		var b acq.Block
		for range int(tapeSeconds) {
			if err := src.Read(t.Context(), &b); err != nil {
				t.Fatal(err)
			}
			for i := range b.Counts {
				tape.counts[i] = append(tape.counts[i], b.Counts[i]...)
			}
		}
		rig{sk: sk, turn: func(_ *Watch, f *frame.Frame) {
			g := *f
			g.Counts, g.Inner = nil, nil
			tape.frames = append(tape.frames, g)
		}}.play(t, acqtest.FromCounts(tape.info, tape.counts, 4096))
	})
	c := make([][]int32, len(tape.counts))
	for i := range c {
		c[i] = slices.Clone(tape.counts[i])
	}
	return sk, tape.info, c
}

// wire is a recording as a person with a screwdriver sees it.
type wire struct {
	info acq.Info
	id   map[string][]int32
	full float64 // codes
	perV float64
	r    *rand.Rand
}

// change rewrites a channel from at to until, s.
func (w *wire) change(id string, at, until float64, f func(t float64, v float64) float64) {
	x := w.id[id]
	for i := int(at * w.info.Rate); i < min(len(x), int(until*w.info.Rate)); i++ {
		v := math.Round(f(float64(i)/w.info.Rate, float64(x[i])))
		x[i] = int32(max(-w.full, min(w.full-1, v)))
	}
}

func (w *wire) hum(t, hz, volts float64) float64 {
	p := 2 * math.Pi * hz * t
	return volts * w.perV * (math.Sin(p) + 0.4*math.Sin(3*p+1) + 0.3*math.Sin(5*p+2) + 0.2*math.Sin(6*p))
}

type faultCase struct {
	name, id string
	want     Fault
	cat      Category
	also     []string // other channels that rightly suffer
	slow     bool     // seen in spectra only
	whole    bool     // wrong from the first sample, and never right
	do       func(w *wire, from, to float64)
}

func faultCases() []faultCase {
	quietNoise := func(w *wire) float64 { return 25 * w.r.NormFloat64() }
	return []faultCase{
		{name: "transmitter stuck", id: "p1h", want: Flat, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, _ float64) float64 { return 1.9e6 })
		}},
		{name: "converter repeats codes for 6 ms of every 80", id: "p1c", want: Flat, cat: Failure, do: func(w *wire, a, b float64) {
			held := 0.0
			w.change("p1c", a, b, func(t, v float64) float64 {
				if math.Mod(t, 0.08) > 0.006 {
					held = v
				}
				return held
			})
		}},
		{name: "accelerometer input at its end", id: "a1", want: Flat, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(_, v float64) float64 { return v + 99*w.perV })
		}},
		{name: "amplifier saturates, with a little noise", id: "a1", want: Clipped, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			lim := 0.12 * w.perV
			w.change("a1", a, b, func(_, v float64) float64 { return max(-lim, min(lim, v)) + w.r.NormFloat64() })
		}},
		{name: "one rail", id: "a1", want: Clipped, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(_, v float64) float64 { return min(0.1*w.perV, v) })
		}},
		{name: "gauge above its range", id: "p1h", want: Range, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, v float64) float64 { return min(5.25*w.perV, v+2.5*w.perV) })
		}},
		{name: "input range too small for a pressure", id: "p1h", want: Clipped, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, v float64) float64 { return min(3.1*w.perV, v) })
		}},
		{name: "amplifier of a pressure saturates, with a few counts of noise", id: "p1h", want: Clipped, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, v float64) float64 { return min(3.1*w.perV, v) + 4*quietNoise(w) })
		}},
		{name: "amplifier saturates at the low end, with a few counts of noise", id: "p1c", want: Clipped, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("p1c", a, b, func(_, v float64) float64 { return max(1.9*w.perV, v) + 4*quietNoise(w) })
		}},
		{name: "open cable, 50 Hz", id: "a1", want: OpenCable, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(t, _ float64) float64 { return w.hum(t, 50, 0.01) + 0.001*w.perV*w.r.NormFloat64() })
		}},
		{name: "open cable, 60 Hz, loud", id: "a1", want: OpenCable, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(t, _ float64) float64 { return w.hum(t, 60, 0.4) + 0.003*w.perV*w.r.NormFloat64() })
		}},
		{name: "open pressure input", id: "p1c", want: LostBias, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("p1c", a, b, func(t, _ float64) float64 { return w.hum(t, 50, 0.02) + quietNoise(w) })
		}},
		{name: "accelerometer dead", id: "a1", want: Dead, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(_, _ float64) float64 { return quietNoise(w) })
		}},
		{name: "gauge cock closed", id: "p1h", want: Dead, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, _ float64) float64 { return 2.1e6 + 900*w.r.NormFloat64() })
		}},
		{name: "bias lost", id: "a1", want: LostBias, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(_, v float64) float64 { return v + 6*w.perV })
		}},
		{name: "transmitter without supply", id: "p1h", want: LostBias, cat: Failure, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(_, _ float64) float64 { return quietNoise(w) })
		}},
		{name: "accelerometer and pressure swapped", id: "p1h", want: Swapped, cat: Failure, also: []string{"a1"}, whole: true, do: func(w *wire, _, _ float64) {
			p, a := w.id["p1h"], w.id["a1"]
			for i := range p {
				p[i], a[i] = a[i], p[i]
			}
		}},
		{name: "pressure on an accelerometer's input", id: "a1", want: Swapped, cat: Failure, do: func(w *wire, a, b float64) {
			copy(w.id["a1"][int(a*w.info.Rate):int(b*w.info.Rate)], w.id["p1c"][int(a*w.info.Rate):])
		}},
		{name: "head end and crank end swapped", id: "p1h", want: Swapped, cat: Failure, also: []string{"p1c"}, whole: true, do: func(w *wire, _, _ float64) {
			p, c := w.id["p1h"], w.id["p1c"]
			for i := range p {
				p[i], c[i] = c[i], p[i]
			}
		}},
		{name: "noisy transmitter", id: "p1c", want: Noisy, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("p1c", a, b, func(_, v float64) float64 { return v + 9000*w.r.NormFloat64() })
		}},
		{name: "accelerometer drowned in noise", id: "a1", want: Noisy, cat: OutOfSpecification, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(_, v float64) float64 { return v + 0.15*w.perV*w.r.NormFloat64() })
		}},
		{name: "hum on a pressure", id: "p1h", want: Hum, cat: OutOfSpecification, slow: true, do: func(w *wire, a, b float64) {
			w.change("p1h", a, b, func(t, v float64) float64 { return v + w.hum(t, 50, 0.1) })
		}},
		{name: "hum on an accelerometer", id: "a1", want: Hum, cat: MaintenanceRequired, slow: true, do: func(w *wire, a, b float64) {
			w.change("a1", a, b, func(t, v float64) float64 { return v + w.hum(t, 60, 0.05) })
		}},
	}
}

// Every fault, wired into a healthy recording: the channel says what it is from the first turn that has it on, no other
// channel is accused, nothing was said before, and after the hold it is believed again (where that is played).
func TestFaultsAreNamed(t *testing.T) {
	for n, c := range faultCases() {
		t.Run(c.name, func(t *testing.T) {
			sk, info, counts := recorded(t)
			w := &wire{info: info, id: map[string][]int32{}, full: math.Exp2(float64(info.Bits - 1)), r: rand.New(rand.NewPCG(1, uint64(n)))}
			for _, ch := range sk.Channels {
				w.id[ch.ID] = counts[ch.Input]
				w.perV = w.full / ch.VoltsFull
			}
			at, until := breaks, mends
			if c.slow {
				at, until = 2.2, tapeSeconds
			}
			if c.whole {
				at, until = 0, tapeSeconds
			}
			c.do(w, at, until)
			healed := n%5 == 0 // whether it is believed again after the hold: the same for all, so some do
			if !c.slow && !healed {
				for i := range counts {
					counts[i] = counts[i][:int(3.2*info.Rate)]
				}
			}
			watch, heard, _ := rig{sk: sk, learn: 16, hold: 12}.again(t, info, counts)
			var first *news
			for i := range heard {
				h := &heard[i]
				t.Logf("turn %d %s %v: %s", h.turn, h.id, h.s.Category, h.s.Reason)
				if h.id != c.id {
					if !slices.Contains(c.also, h.id) {
						t.Errorf("%s is accused too", h.id)
					}
					continue
				}
				if first == nil {
					first = h
				}
			}
			if first == nil {
				t.Fatal("nothing was said")
			}
			worst := first.s
			for _, h := range heard {
				if h.id == c.id && h.turn <= first.turn+3 && h.s.Category >= worst.Category {
					worst = h.s
				}
			}
			if worst.Fault != c.want || worst.Category != c.cat {
				t.Errorf("said to be %v, %v, want %v, %v", worst.Fault, worst.Category, c.want, c.cat)
			}
			if !strings.Contains(worst.Reason, c.id) || !strings.Contains(worst.Reason, "usually") {
				t.Errorf("the sentence does not help: %q", worst.Reason)
			}
			period := 60 / 740.0 * info.Rate
			switch lag := float64(first.s.First) - at*info.Rate; {
			case c.slow && (lag > 1.7*info.Rate || lag < -1.7*info.Rate):
				t.Errorf("suspect from %.2f s after the first bad sample", lag/info.Rate)
			case !c.slow && !c.whole && (lag > 1.01*period || lag < -1.01*period):
				t.Errorf("suspect from %.1f turns after the first bad sample", lag/period)
			}
			i := slices.IndexFunc(watch.ch, func(x watched) bool { return x.ID == c.id })
			if s := watch.State(i); healed && until < tapeSeconds && s.Category != Good {
				t.Errorf("after it was mended: %v", s)
			}
		})
	}
}

// At rest a healthy recording says nothing, and a hum that sits on a shaft order cannot be told from the machine.
func TestWhatIsNoFault(t *testing.T) {
	for _, c := range []struct {
		name string
		do   func(w *wire)
	}{
		{"as it is", func(*wire) {}},
		{"a shaft order near the mains", func(w *wire) {
			w.change("a1", 2.5, tapeSeconds, func(t, v float64) float64 { return v + 0.02*w.perV*math.Sin(2*math.Pi*4*740.0/60*t) })
		}},
		{"one wild turn", func(w *wire) {
			w.change("p1h", 2.97, 3.02, func(_, _ float64) float64 { return 1e6 })
			w.change("a1", 4.03, 4.06, func(_, v float64) float64 { return v + 3*w.perV })
		}},
		{"a coarse converter", func(w *wire) {
			for _, id := range []string{"p1h", "p1c", "a1"} {
				w.change(id, 0, tapeSeconds, func(_, v float64) float64 { return 4096 * math.Round(v/4096) }) // 12 bits
			}
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			sk, info, counts := recorded(t)
			w := &wire{info: info, id: map[string][]int32{}, full: math.Exp2(float64(info.Bits - 1))}
			for _, ch := range sk.Channels {
				w.id[ch.ID] = counts[ch.Input]
				w.perV = w.full / ch.VoltsFull
			}
			c.do(w)
			_, heard, turns := rig{sk: sk, learn: 16}.again(t, info, counts)
			for _, h := range heard {
				t.Errorf("turn %d %s %v: %s", h.turn, h.id, h.s.Category, h.s.Reason)
			}
			if turns < 65 {
				t.Errorf("%d turns", turns)
			}
		})
	}
}
