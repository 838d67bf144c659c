package station

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// The whole field: pressure ratios 1.8 to 3.6, 500 to 1000 rpm, pocket in and out, one end unloaded. Ten minutes or so;
// LAPWING_FIELD=long switches it on (`make field`), -v prints the tables.

// lesson is the learning walk of a load step: corners and edges of the field and points between them.
func lesson(step int) []fieldDuty {
	walk := []fieldDuty{{1.76, 500, 8, 0}, {2.6, 500, 7, 0}, {3.7, 500, 8, 0}, {3.1, 620, 9, 0}, {3.7, 760, 7, 0}, {2.6, 760, 8, 0}, {1.76, 760, 9, 0}, {2.2, 880, 7, 0},
		{1.76, 1004, 7, 0}, {2.6, 1004, 9, 0}, {3.7, 1004, 8, 0}, {3.1, 880, 9, 0}, {2.2, 620, 7, 0}, {3.3, 690, 7, 0}, {1.76, 640, 7.5, 0}, {2.0, 1004, 8.5, 0}, {2.9, 560, 8.5, 0}}
	for k := range walk {
		walk[k].step = step
	}
	return walk
}

var middle = fieldDuty{2.6, 740, 8, 0}

const holdTurns = 90 // of each duty of the learning walk: half of them are steady

// learnField learns the three load steps on one machine: the seed gives it its valves' and gauges' peculiarities.
func learnField(t testing.TB, sk, told *skid.Skid, seed uint64) *outcome {
	s, end := begin(sk, middle), 4.0
	for _, step := range []int{0, 1, 2} {
		rpm := s.RPM
		for _, a := range lesson(step) {
			over := max(1, ramp(rpm, a.rpm))
			s, rpm = a.set(s, end, over), a.rpm
			end += over + holdTurns*60/a.rpm
		}
	}
	return trial{machine: sk, told: told, seed: seed, script: s, seconds: end, teach: true}.run(t)
}

// wander is another walk through the learnt field: holds of a few seconds, speed ramps of 10 % a second, load steps, and
// every third time a swing of the discharge pressure by ±8 % within seconds.
func wander(s model.Script, at, until float64, seed uint64, steps []int) model.Script {
	r := rand.New(rand.NewPCG(seed, 77))
	in := func(lo, hi float64) float64 { return lo + (hi-lo)*r.Float64() }
	rpm := s.RPM
	for k := 0; at < until; k++ {
		a := fieldDuty{ratio: in(1.8, 3.6), rpm: in(505, 995), ps: in(7.1, 8.9)}
		over := max(0.2, ramp(rpm, a.rpm))
		s = s.Add(at, 2, model.SuctionPressure, "1", a.ps*1e5).Add(at, 2, model.DischargePressure, "1", a.ps*a.ratio*1e5).
			Add(at, over, model.Speed, "", a.rpm)
		if k%2 == 1 {
			s = s.Add(at+over, 0, model.LoadStep, "", float64(steps[(k/2)%len(steps)]))
		}
		rpm = a.rpm
		at += max(over, 2) + in(3, 7)
		if k%3 == 2 {
			for n := range 4 {
				ratio := min(3.6, max(1.8, a.ratio*(1+0.08*float64(1-2*(n%2)))))
				s = s.Add(at, 1.5, model.DischargePressure, "1", ratio*a.ps*1e5)
				at += 1.5
			}
		}
	}
	return s
}

func longOnly(t *testing.T) {
	if os.Getenv("LAPWING_FIELD") != "long" {
		t.Skip("the whole field takes ten minutes: set LAPWING_FIELD=long, or run make field")
	}
}

// Healthy machines of several seeds, with the ripple of the shaft known and not known: windows follow, and nothing
// above advisory is said.
func TestFieldHealthy(t *testing.T) {
	longOnly(t)
	blind := fieldSkid(t)
	blind.Phase.Ripple, blind.Phase.Uncertainty = nil, 0
	for _, c := range []struct {
		name string
		seed uint64
		told *skid.Skid
	}{{"ripple known", 1, nil}, {"ripple known, another machine", 2, nil}, {"ripple not known", 3, blind}} {
		sk := fieldSkid(t)
		l := learnField(t, sk, c.told, c.seed)
		t.Logf("=== %s, seed %d: learning walk", c.name, c.seed)
		l.print(t)
		l.score(4, math.Inf(1)).meets(t)
		for walk := range uint64(2) {
			s := wander(begin(sk, middle), 4, 240, 5+10*c.seed+walk, []int{1, 2, 0})
			o := trial{machine: sk, told: c.told, seed: c.seed, script: s, seconds: 240, base: l.learnt, memory: &l.windows}.run(t)
			t.Logf("=== %s, seed %d: walk %d", c.name, c.seed, walk+1)
			o.print(t)
			sc := o.score(4, math.Inf(1))
			sc.meets(t)
			sc.byDuty(t)
			for _, h := range append(o.findings, o.alarms...) {
				if h.grade > verdict.Advisory {
					t.Errorf("healthy, but at %.1f s: %s", h.at, h.said)
				}
			}
		}
	}
}

// byDuty prints the openings inside their windows by load step.
func (s *score) byDuty(t testing.TB) {
	if len(s.misses) == 0 {
		return
	}
	n := map[string]int{}
	for _, m := range s.misses {
		n[fmt.Sprintf("%s, %s", wire.EventNames[m.event], m.w.why)]++
	}
	for _, k := range sortedKeys(n) {
		t.Logf("  missed %3d  %s", n[k], k)
	}
}

// fault is one thing that goes wrong in a walk through the field.
type fault struct {
	name    string
	key     string // the finding that is right; empty: there need not be one
	least   verdict.Grade
	also    []string // what may be said beside it; a finding at most as an advisory
	steps   []int
	changes []model.Change
	told    func(sk *skid.Skid) // what is wrong in the skid file
}

func faults() (out []fault) {
	all, loaded := []int{0, 1, 2, 0}, []int{0, 1}
	grow := func(what model.What, where string, to float64) []model.Change {
		return []model.Change{{At: 10, Over: 20, What: what, Where: where, To: to}}
	}
	for _, mm2 := range []float64{12, 30} {
		for _, v := range []string{"t1.he.s1", "t1.he.d1", "t1.ce.s1", "t1.ce.d1", "t2.ce.d2"} {
			f := fault{name: fmt.Sprintf("%s leaks %g mm²", v, mm2), key: groupOf(v) + "/" + verdict.Leaking, least: verdict.Alert, steps: all,
				changes: grow(model.ValveLeak, v, mm2*model.MM2)}
			if strings.HasPrefix(v, "t1.he") {
				f.steps = loaded // an idle end's valves cannot be judged
			}
			out = append(out, f)
		}
		out = append(out,
			fault{name: fmt.Sprintf("t1 rings leak %g mm²", mm2), key: "t1.rings/" + verdict.Leaking, least: verdict.Alert, steps: all, changes: grow(model.RingLeak, "t1", mm2*model.MM2)},
			// Packing looks like the crank end's suction; the finding says so.
			fault{name: fmt.Sprintf("t1 packing leaks %g mm²", mm2), key: "t1.ce.suction/" + verdict.Leaking, least: verdict.Alert, also: []string{"t1.packing/" + verdict.Leaking},
				steps: all, changes: grow(model.PackingLeak, "t1", mm2*model.MM2)})
	}
	for _, bar := range []float64{-0.3, 0.3, 1} {
		out = append(out, fault{name: fmt.Sprintf("p1h zero %+g bar", bar), key: "p1h/" + verdict.PressureZero, least: verdict.Advisory, also: []string{"p1h/sensor"}, steps: all, changes: grow(model.PressureZero, "p1h", bar*1e5)})
	}
	for _, g := range []float64{0, 0.5, 2} {
		out = append(out, fault{name: fmt.Sprintf("a1 gain ×%g", g), key: "a1/" + verdict.AccelGain, least: verdict.Advisory, also: []string{"a1/sensor"}, steps: all, changes: grow(model.AccelGain, "a1", g)})
	}
	for _, d := range []float64{-1, 1} {
		out = append(out, fault{name: fmt.Sprintf("t1 dead centre %+g° wrong", d), key: "t1/" + verdict.DeadCentre, least: verdict.Advisory, steps: all,
			told: func(sk *skid.Skid) { sk.Throws[0].DeadCentre += d }})
	}
	return append(out,
		fault{name: "t1.he.d1 broken", key: "t1.he.discharge/" + verdict.ImpactingHard, least: verdict.Advisory, steps: loaded, changes: grow(model.Broken, "t1.he.d1", 0.7)},
		fault{name: "t1.he.d sticks 10 %", key: "t1.he.discharge/" + verdict.OpeningLate, least: verdict.Alert, steps: loaded,
			changes: append(grow(model.Sticky, "t1.he.d1", 0.1), grow(model.Sticky, "t1.he.d2", 0.1)...)})
}

// Each fault in a walk through the field: the right subject is named; no valve is called confirmed for a sensor's fault.
func TestFieldFaults(t *testing.T) {
	longOnly(t)
	sk := fieldSkid(t)
	l := learnField(t, sk, nil, 1)
	table := []string{fmt.Sprintf("%-28s %-32s %9s %9s %9s  %s", "fault, grown from 10 to 30 s", "finding", "advisory", "alert", "danger", "also said")}
	for k, f := range faults() {
		t.Run(f.name, func(t *testing.T) {
			s := wander(begin(sk, middle), 4, 70, 21+uint64(k%5), f.steps)
			s.Changes = append(s.Changes, f.changes...)
			o := trial{machine: sk, told: f.skid(t), seed: 1, script: s, seconds: 70, base: l.learnt, memory: &l.windows}.run(t)
			table = append(table, f.row(o))
			if f.key != "" {
				o.names(t, f.key, f.least)
			}
			o.accusesNoOther(t, append(f.also, f.key)...)
			for _, h := range o.findings {
				if slices.Contains(f.also, h.key) && h.grade > verdict.Advisory && h.key != f.key {
					t.Errorf("at %.1f s: %s", h.at, h.said)
				}
			}
		})
	}
	t.Log("\n" + strings.Join(table, "\n"))
}

func (f fault) skid(t testing.TB) *skid.Skid {
	if f.told == nil {
		return nil
	}
	sk := fieldSkid(t)
	f.told(sk)
	return sk
}

func (f fault) row(o *outcome) string {
	first := [verdict.Danger + 1]string{"", "-", "-", "-"}
	var others []string
	for _, h := range o.findings {
		switch {
		case h.key == f.key && first[h.grade] == "-":
			first[h.grade] = fmt.Sprintf("%.1f s", h.at)
		case h.key != f.key && h.grade > verdict.None:
			others = append(others, fmt.Sprintf("%s %v %.1f s", h.key, h.grade, h.at))
		}
	}
	return fmt.Sprintf("%-28s %-32s %9s %9s %9s  %s", f.name, f.key, first[verdict.Advisory], first[verdict.Alert], first[verdict.Danger], strings.Join(others, ", "))
}
