package station

import (
	"math"
	"slices"
	"testing"

	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/verdict"
	"lapwing/internal/window"
)

// The whole line on the modelled machine of configs/biomethane-two-throw.yaml, held against the truth behind the
// samples. Here is what fits into every test run; `make field` plays it over the whole field (field_long_test.go).

// Targets of the line on the model, as shares of turns and in degrees.
const (
	openingsInside, closingsInside = 0.99, 0.95
	openingError                   = 0.7
)

// While both line pressures, the speed and the load step move, every valve event lies in its window.
func TestFieldWindowsFollow(t *testing.T) {
	t.Parallel()
	sk := fieldSkid(t)
	s := begin(sk, fieldDuty{1.8, 1000, 8, 0}).Add(2, 2, model.DischargePressure, "1", 28.8e5).Add(3, 2, model.Speed, "", 820).
		Add(5.3, 0, model.LoadStep, "", 1).Add(6.6, 1, model.SuctionPressure, "1", 9e5).Add(6.8, 0, model.LoadStep, "", 2)
	o := trial{machine: sk, seed: 1, script: s, seconds: 8.5}.run(t)
	o.score(1, math.Inf(1)).meets(t)
}

// A short learning run at one duty; healthy turns after it raise nothing. Then a leak in each valve group of a throw in
// turn: that group is named, confirmed by pressure and vibration together, and no other. Then sensors that go wrong: they
// are named, and no valve.
func TestFieldNamesWhatIsWrong(t *testing.T) {
	t.Parallel()
	sk := firstThrow(fieldSkid(t))
	at := fieldDuty{2.6, 1000, 8, 0}
	healthy := trial{machine: sk, seed: 1, script: begin(sk, at), seconds: 9.5, steady: 70}.run(t)
	if healthy.learnt == nil || healthy.blocks < 4 {
		t.Fatalf("%d blocks were judged after learning", healthy.blocks)
	}
	if len(healthy.findings)+len(healthy.alarms) > 0 {
		t.Errorf("the healthy machine is accused: %+v %+v", healthy.findings, healthy.alarms)
	}
	for _, valve := range []string{"t1.he.s1", "t1.he.d2", "t1.ce.s2", "t1.ce.d1"} {
		t.Run(valve, func(t *testing.T) {
			s := begin(sk, at).Add(0, 0, model.ValveLeak, valve, 30*model.MM2)
			o := trial{machine: sk, seed: 1, script: s, seconds: 5, base: healthy.learnt, memory: &healthy.windows}.run(t)
			o.names(t, groupOf(valve)+"/"+verdict.Leaking, verdict.Alert)
			o.accusesNoOther(t, groupOf(valve)+"/"+verdict.Leaking)
		})
	}
	t.Run("sensors", func(t *testing.T) {
		s := begin(sk, at).Add(0, 0, model.PressureZero, "p1h", 0.3e5).Add(0, 0, model.AccelGain, "a1", 0.5)
		o := trial{machine: sk, seed: 1, script: s, seconds: 5, base: healthy.learnt, memory: &healthy.windows}.run(t)
		o.names(t, "p1h/"+verdict.PressureZero, verdict.Advisory)
		o.names(t, "a1/"+verdict.AccelGain, verdict.Advisory)
		o.accusesNoOther(t, "p1h/"+verdict.PressureZero, "a1/"+verdict.AccelGain)
	})
}

// firstThrow leaves the rest of the machine away: half the work.
func firstThrow(sk *skid.Skid) *skid.Skid {
	keep := append([]string{sk.Phase.Channel, sk.Throws[0].Ends[0].Pressure, sk.Throws[0].Ends[1].Pressure}, sk.Throws[0].Accel...)
	sk.Throws = sk.Throws[:1]
	sk.Channels = slices.DeleteFunc(sk.Channels, func(c skid.Channel) bool { return !slices.Contains(keep, c.ID) })
	for i := range sk.Channels {
		sk.Channels[i].Input = i
	}
	sk.Limits = nil
	return sk
}

// groupOf gives the valve group of a valve.
func groupOf(valve string) string {
	return valve[:len("t1.he.")] + map[byte]string{'s': "suction", 'd': "discharge"}[valve[len("t1.he.")]]
}

// meets fails the test when the windows miss the targets.
func (s *score) meets(t testing.TB) {
	t.Helper()
	s.print(t)
	var errs []float64
	for ev := range s.ev {
		c, target := &s.ev[ev], closingsInside
		if e := window.Event(ev); e == window.SuctionOpens || e == window.DischargeOpens {
			target = openingsInside
			errs = append(errs, c.errs...)
		}
		if c.n == 0 || float64(c.in) < target*float64(c.n) {
			t.Errorf("event %d: %d of %d impacts inside their windows, wanted %g %%", ev, c.in, c.n, 100*target)
		}
	}
	if m := quantileOf(absolute(errs), 0.5); !(m <= openingError) {
		t.Errorf("median opening error %.2f°", m)
	}
}

// names fails the test unless a finding reached a grade, with pressure and vibration behind it when it is confirmed.
func (out *outcome) names(t testing.TB, key string, least verdict.Grade) {
	t.Helper()
	best := heard{grade: verdict.None}
	for _, h := range out.findings {
		if h.key == key && h.grade > best.grade {
			best = h
		}
	}
	if best.grade < least {
		t.Errorf("%s: reached %v, wanted %v", key, best.grade, least)
	} else if best.grade >= verdict.Alert && !(best.pressure && best.vibration) {
		t.Errorf("%s: %v without both pressure and vibration: %s", key, best.grade, best.said)
	}
}

// accusesNoOther fails the test when anything but these findings was said or raised.
func (out *outcome) accusesNoOther(t testing.TB, keys ...string) {
	t.Helper()
	for _, h := range append(out.findings, out.alarms...) {
		if !slices.Contains(keys, h.key) {
			t.Errorf("at %.1f s %s %v: %s", h.at, h.key, h.grade, h.said)
		}
	}
}
