package station

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
	source "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// wired is a healthy machine on tape, with what the line has learnt of it.
type wired struct {
	sk   *skid.Skid
	info acq.Info
	tail [][]int32 // healthy, after the learning run
	base *duty.Baseline
	mem  Memory
}

// solder makes 16 s of the machine's first throw and lets the line learn from the first half.
func solder(t *testing.T) *wired {
	t.Helper()
	w := &wired{sk: firstThrow(fieldSkid(t))}
	src, err := source.Open(w.sk, model.Script{}, source.Options{Seed: 8, Duration: 17 * time.Second, BlockLen: 8192})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	w.info = src.Info()
	all := make([][]int32, w.info.Channels)
	var b acq.Block
	for src.Read(context.Background(), &b) == nil {
		for i := range all {
			all[i] = append(all[i], b.Counts[i]...)
		}
	}
	half := int(9 * w.info.Rate)
	head := make([][]int32, len(all))
	for i := range all {
		head[i] = all[i][:half]
		w.tail = append(w.tail, all[i][half:])
	}
	line := w.line(t, LearnPlan{Steady: 75}, nil)
	for _, o := range w.play(t, line, head) {
		if o.learnt != nil {
			w.base = o.learnt
		}
	}
	if w.base == nil {
		t.Fatal("nothing was learnt")
	}
	w.mem = line.Memory()
	return w
}

func (w *wired) line(t *testing.T, p LearnPlan, base *duty.Baseline) *Line {
	t.Helper()
	l, err := NewLine(w.sk, w.info, processAt(fixed(w.sk)), p, base, alarm.New(AlarmTiming(w.sk)))
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// told is what one Output said.
type told struct {
	at     float64
	seq1   int64
	turn   bool
	absent map[string]string // of the head end
	tr     []alarm.Transition
	learnt *duty.Baseline
}

func (w *wired) play(t *testing.T, l *Line, counts [][]int32) (out []told) {
	t.Helper()
	emit := func(o *Output) {
		h := told{at: o.Record.TimeS, seq1: o.Record.Samples[1], turn: o.Record.Valid, tr: slices.Clone(o.Transitions), learnt: o.Baseline}
		if o.Record.Valid {
			h.absent = o.Record.Throws[0].Ends[0].Absent
		}
		out = append(out, h)
	}
	for _, b := range acqtest.Cut(acq.Block{N: len(counts[0]), Counts: counts}, func(i int) int { return 700 + i%900 }) {
		if err := l.Add(&b, emit); err != nil {
			t.Fatal(err)
		}
	}
	l.Flush(emit)
	return out
}

// Whatever is done to a channel, the channel is named and no valve is: the line says <channel>/sensor and nothing else.
func TestChannelsAreNotValves(t *testing.T) {
	t.Parallel()
	w := solder(t)
	at := func(s float64) int { return int(s * w.info.Rate) }
	input := func(id string) int { c, _ := w.sk.ChannelByID(id); return c.Input }
	full := float64(int64(1) << (w.info.Bits - 1))
	volt := full / 10
	for _, c := range []struct {
		name string
		want string // key; empty: nothing may be said
		sev  alarm.Severity
		from float64 // s into the recording at which it goes wrong
		do   func(x [][]int32, r *rand.Rand)
		gone string // a measure of the head end that must be absent from then on
	}{
		{name: "healthy"},
		{name: "clipped accelerometer", want: "a1/sensor", sev: alarm.Advisory, from: 2, do: func(x [][]int32, _ *rand.Rand) {
			for i := at(2); i < len(x[0]); i++ {
				x[input("a1")][i] = int32(max(-0.1*volt, min(0.1*volt, float64(x[input("a1")][i]))))
			}
		}},
		{name: "transmitter stuck", want: "p1h/sensor", sev: alarm.Alert, from: 2, gone: "indicated_power_kw", do: func(x [][]int32, _ *rand.Rand) {
			for i := at(2); i < len(x[0]); i++ {
				x[input("p1h")][i] = x[input("p1h")][at(2)]
			}
		}},
		{name: "noisy transmitter", want: "p1h/sensor", sev: alarm.Advisory, from: 2, gone: "indicated_power_kw", do: func(x [][]int32, r *rand.Rand) {
			for i := at(2); i < len(x[0]); i++ {
				x[input("p1h")][i] += int32(15000 * r.NormFloat64())
			}
		}},
		{name: "hum in an accelerometer", want: "a1/sensor", sev: alarm.Advisory, from: 2, do: func(x [][]int32, _ *rand.Rand) {
			for i := at(2); i < len(x[0]); i++ {
				p := 2 * math.Pi * 60 * float64(i) / w.info.Rate
				x[input("a1")][i] += int32(0.05 * volt * (math.Sin(p) + 0.4*math.Sin(2*p)))
			}
		}},
		{name: "somebody works at the cable", want: "a1/sensor", sev: alarm.Alert, from: 2, do: func(x [][]int32, r *rand.Rand) {
			for i := at(2); i < at(5); i++ {
				v := 0.3 * volt * math.Sin(2*math.Pi*50*float64(i)/w.info.Rate)
				switch k := i / at(0.4) % 3; {
				case k == 0 && i%at(0.1) < 300:
					v = full * math.Copysign(1, r.NormFloat64())
				case k == 1:
					v = 20 * r.NormFloat64()
				}
				x[input("a1")][i] = int32(max(-full, min(full-1, v)))
			}
		}},
		{name: "head end and crank end swapped", want: "p1h/sensor", sev: alarm.Alert, gone: "indicated_power_kw", do: func(x [][]int32, _ *rand.Rand) {
			x[input("p1h")], x[input("p1c")] = x[input("p1c")], x[input("p1h")]
		}},
		{name: "pick-up unplugged", want: "phase/sensor", sev: alarm.Alert, from: 4, do: func(x [][]int32, r *rand.Rand) {
			for i := at(4); i < len(x[0]); i++ {
				x[input("phase")][i] = int32(0.5*volt + 13000*r.NormFloat64())
			}
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			var x [][]int32
			for _, s := range w.tail {
				x = append(x, slices.Clone(s))
			}
			if c.do != nil {
				c.do(x, rand.New(rand.NewPCG(1, 1)))
			}
			line := w.line(t, LearnPlan{}, w.base)
			if err := line.Remember(w.mem); err != nil {
				t.Fatal(err)
			}
			worst, first := alarm.NoSeverity, 0.0
			turns := 0
			for _, o := range w.play(t, line, x) {
				if o.turn {
					turns++
				}
				for _, tr := range o.tr {
					t.Logf("at %.2f s %s → %s, %s: %s", o.at, tr.Key, tr.To, tr.Severity, tr.Sentence)
					switch {
					case tr.Key == c.want:
						worst = max(worst, tr.Severity)
						if first == 0 {
							first = o.at
						}
					case c.name == "head end and crank end swapped" && tr.Key == "p1c/sensor":
					default:
						t.Errorf("%s is accused", tr.Key)
					}
				}
				if c.gone != "" && o.turn && o.seq1 > int64(c.from*w.info.Rate)+5*4200 && !strings.HasPrefix(o.absent[c.gone], "sensor: ") && o.absent[c.gone] == "" {
					t.Errorf("at %.2f s %s is still measured", o.at, c.gone)
				}
			}
			if c.want == "" {
				return
			}
			late := 1.0
			if strings.HasPrefix(c.name, "hum") {
				late = 4
			}
			if worst != c.sev || first < c.from-0.2 || first > c.from+late {
				t.Errorf("%s reached %v, said at %.2f s; want %v within %.1f s of %.2f", c.want, worst, first, c.sev, late, c.from)
			}
			for _, ch := range line.Channels() {
				if ch.ID+"/sensor" == c.want && ch.State == "good" && c.name != "somebody works at the cable" {
					t.Errorf("the health of %s says good", ch.ID)
				}
			}
			if c.want != "phase/sensor" && turns < 80 {
				t.Errorf("%d turns", turns)
			}
		})
	}
}
