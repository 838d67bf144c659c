package station

import (
	"math"
	"os"
	"sync"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// truthWalk moves ratio and speed about every hold seconds.
func truthWalk(sk *skid.Skid, s model.Script, seconds, hold float64, first int) model.Script {
	l := sk.Process.Stages[0]
	duty := [][2]float64{{1, 1}, {1.2, .95}, {.85, 1.05}, {1.1, .85}, {.95, .9}, {1.15, 1.02}, {.9, .95}}
	for k := 0; float64(k)*hold < seconds; k++ {
		d := duty[(k+first)%len(duty)]
		s = s.Add(float64(k)*hold, 2, model.DischargePressure, "", l.Pd*d[0]).Add(float64(k)*hold, 2, model.Speed, "", .95*sk.Machine.MaxRPM*d[1])
	}
	return s
}

type truthRig struct {
	sk   *skid.Skid
	base *duty.Baseline
	mem  Memory
	seed uint64
}

// learntRig is one for all tests that need one: its learning run is most of their time.
var learntRig struct {
	once sync.Once
	r    *truthRig
}

func theTruthRig(t testing.TB) *truthRig {
	t.Helper()
	learntRig.once.Do(func() { learntRig.r = newTruthRig(t, 3) })
	if learntRig.r == nil {
		t.Fatal("nothing was learnt")
	}
	return learntRig.r
}

func newTruthRig(t testing.TB, seed uint64) *truthRig {
	t.Helper()
	r := &truthRig{sk: smallSkid(t), seed: seed}
	l := through(t, r.sk, truthWalk(r.sk, model.Script{}, 90, 6, 0), seed, 90, func(info acq.Info) *Line {
		l, err := NewLine(r.sk, info, nil, LearnPlan{Steady: 500}, nil, alarm.New(AlarmTiming(r.sk)))
		if err != nil {
			t.Fatal(err)
		}
		l.records = Heads
		return l
	}, func(l *Line, o *Output) {
		if o.Baseline != nil {
			r.base = o.Baseline
		}
		if o.LearnError != nil {
			t.Fatal(o.LearnError)
		}
	})
	if r.base == nil {
		n, want := l.Learnt()
		t.Fatalf("nothing was learnt: %d of %d", n, want)
	}
	r.mem = l.Memory()
	return r
}

// hears plays a script and gives what was said: key → worst severity.
func (r *truthRig) hears(t testing.TB, s model.Script, seconds float64, first int, also func(l *Line, o *Output)) (worst map[string]alarm.Severity, l *Line) {
	t.Helper()
	worst = map[string]alarm.Severity{}
	l = through(t, r.sk, truthWalk(r.sk, s, seconds, 6, first), r.seed, seconds, func(info acq.Info) *Line {
		l, err := NewLine(r.sk, info, nil, LearnPlan{}, r.base, alarm.New(AlarmTiming(r.sk)))
		if err != nil {
			t.Fatal(err)
		}
		l.records = Heads
		if err := l.Remember(r.mem); err != nil {
			t.Fatal(err)
		}
		return l
	}, func(l *Line, o *Output) {
		for _, tr := range o.Transitions {
			worst[tr.Key] = max(worst[tr.Key], tr.Severity)
			if tr.Severity > alarm.NoSeverity {
				t.Logf("%.1f s %s %v: %s", o.Record.TimeS, tr.Key, tr.Severity, tr.Sentence)
			}
		}
		if also != nil {
			also(l, o)
		}
	})
	return worst, l
}

// The table of wrong pressures: zeros off by 0.5 to 2 % of the transducer's span and sensitivities off by 1 to 5 %, that
// come on within a second after a healthy baseline. Each is said of its own channel, and no valve is named. Three cases
// always, all 24 in the long runs.
func TestPressureErrorsAreTheChannels(t *testing.T) {
	t.Parallel()
	r := theTruthRig(t)
	type wrong struct {
		what  model.What
		share float64
		id    string
	}
	list := []wrong{{model.PressureZero, -.02, "p1h"}, {model.PressureGain, .01, "p1c"}}
	if os.Getenv("LAPWING_FIELD") != "" {
		list = nil
		for _, id := range []string{"p1h", "p1c"} {
			for _, v := range []float64{-.02, -.01, -.005, .005, .01, .02} {
				list = append(list, wrong{model.PressureZero, v, id})
			}
			for _, v := range []float64{-.05, -.02, -.01, .01, .02, .05} {
				list = append(list, wrong{model.PressureGain, v, id})
			}
		}
	}
	for _, c := range list {
		ch, _ := r.sk.ChannelByID(c.id)
		to, want, name := c.share*(ch.Max-ch.Min), c.id+"/pressure-zero", "zero"
		if c.what == model.PressureGain {
			to, want, name = 1+c.share, c.id+"/"+sensorKind, "sensitivity"
		}
		first, seconds := math.NaN(), 16.
		if c.what == model.PressureGain {
			seconds = 28
		}
		worst, l := r.hears(t, model.Script{}.Add(3, 1, c.what, c.id, to), seconds, 1, func(_ *Line, o *Output) {
			for _, tr := range o.Transitions {
				if tr.Key == want && math.IsNaN(first) {
					first = o.Record.TimeS - 3
				}
			}
		})
		t.Logf("%s %s %+.1f %%: %v, first after %.1f s; %s", c.id, name, 100*c.share, worst, first, channelNamed(t, l.Channels(), c.id).Reason)
		if len(worst) != 1 || worst[want] == alarm.NoSeverity {
			t.Errorf("%s %s %+.1f %%: said is %v, wanted %s alone", c.id, name, 100*c.share, worst, want)
		}
		if c.what == model.PressureGain {
			g, doubt := l.levels.throws[0].level.Gain(map[string]int{"p1h": 0, "p1c": 1}[c.id])
			if !doubt || math.Abs(g-c.share) > .003+.1*math.Abs(c.share) {
				t.Errorf("%s: sensitivity said to be %+.2f %%, it is %+.1f %%", c.id, 100*g, 100*c.share)
			}
		}
	}
}

// A zero that drifts with temperature is followed and taken off: nothing is said of a valve, the drift is told of the
// channel from half a per cent of its span on. An hour of drift is a long run; a quarter of one is not slow enough to be
// a fair test.
func TestThermalDriftIsTakenOff(t *testing.T) {
	if os.Getenv("LAPWING_FIELD") == "" {
		t.Skip("long: set LAPWING_FIELD")
	}
	r := theTruthRig(t)
	ch, _ := r.sk.ChannelByID("p1h")
	to := .006 * (ch.Max - ch.Min)
	worst, l := r.hears(t, model.Script{}.Add(30, 3600, model.PressureZero, "p1h", to), 3900, 1, nil)
	off := l.levels.throws[0].level.Offset(0)
	t.Logf("drift of %.3f bar in an hour: %.3f bar taken off, said is %v, %+v", to/1e5, off/1e5, worst, channelNamed(t, l.Channels(), "p1h"))
	if len(worst) != 1 || worst["p1h/"+sensorKind] != alarm.Advisory || math.Abs(off/to-1) > .05 {
		t.Errorf("%.3f of %.3f bar, said is %v", off/1e5, to/1e5, worst)
	}
}
