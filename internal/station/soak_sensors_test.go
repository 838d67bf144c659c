package station

import (
	"fmt"
	"os"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/verdict"
)

// soakSensorFaults are what goes wrong with channels, marks and readings.
func soakSensorFaults() []soakFault {
	one := func(name string, what model.What, where string, to float64) soakFault {
		return soakFault{name: name, what: what, where: []string{where}, sizes: []float64{to}}
	}
	out := []soakFault{
		one("p1h zero +0.5 bar in 25 s", model.PressureZero, "p1h", 0.5e5), one("p1c zero -0.5 bar in 25 s", model.PressureZero, "p1c", -0.5e5),
		one("p1h reads 5 % high", model.PressureGain, "p1h", 1.05), one("p1c reads 5 % low", model.PressureGain, "p1c", 0.95),
		one("a1 half as loud", model.AccelGain, "a1", 0.5), one("a1 twice as loud", model.AccelGain, "a1", 2),
		one("marks 1.5° late", model.PhaseSlip, "", 1.5), one("marks 1.5° early", model.PhaseSlip, "", -1.5),
		one("extra pulses, 5 % of turns", model.ExtraPulses, "", .05), one("pulses missing, 5 % of turns", model.MissedPulses, "", .05),
		one("process values frozen", model.FrozenProcess, "", 1),
		one("p1h and p1c exchanged", model.Swapped, "p1h p1c", 1), one("p1c and a1 exchanged", model.Swapped, "p1c a1", 1),
		one("p1h clipped", model.Clip, "p1h", .22), one("a1 clipped", model.Clip, "a1", .02),
	}
	for _, c := range []string{"p1h", "p1c", "a1"} {
		out = append(out, one(c+" open", model.OpenCircuit, c, 1), one(c+" flat", model.Flat, c, 1))
	}
	return append(out, one("mark's channel open", model.OpenCircuit, "phase", 1))
}

// TestSoakSensors plays every sensor fault at rest and in swings: something about a sensor must be said, and nothing above
// advisory about a valve.
func TestSoakSensors(t *testing.T) {
	soakOnly(t, "sensors")
	first, machines := asInt(t, "SEED", 1), asInt(t, "MACHINES", 1)
	table := []string{"| fault | load | machine | said about the sensor, turns after | said about valves | highest |", "|---|---|---|---|---|---|"}
	for seed := first; seed < first+machines; seed++ {
		m := soakMachine(t, uint64(seed), stepFull)
		for _, f := range soakSensorFaults() {
			if !strings.Contains(f.name, os.Getenv("FAULT")) {
				continue
			}
			for _, moves := range []bool{false, true} {
				if f.what == model.FrozenProcess && !moves {
					continue // what stands still is right to
				}
				load := map[bool]string{false: "steady", true: "swings"}[moves]
				t.Run(fmt.Sprintf("%d %s %s", seed, f.name, load), func(t *testing.T) {
					r := m.misreads(t, f, moves)
					table = append(table, fmt.Sprintf("| %s | %s | %d | %s | %s | %v |", f.name, load, seed, strings.Join(r.named, "; "), strings.Join(r.valves, "; "), r.worst))
					t.Log(r.text)
					if len(r.named) == 0 {
						t.Errorf("no word about the sensor")
					}
					if r.worst > verdict.Advisory {
						t.Errorf("a valve is called %v", r.worst)
					}
				})
			}
		}
	}
	t.Log("\n" + strings.Join(table, "\n"))
}

// misread is what came of a sensor's fault.
type misread struct {
	named, valves []string
	worst         verdict.Grade // of a finding about a part
	text          string
}

func (m *soaked) misreads(t testing.TB, f soakFault, moves bool) (out misread) {
	s, end := begin(m.sk, middle), 40.0
	const begins = 8.0
	if moves {
		s, end = roam(s, 3, 450, 77+m.seed, []int{stepFull}, false)
	} else {
		s.Drift = model.Drift{Ps: .01, Pd: .015, Speed: .01, Ts: 1, Period: 47}
	}
	over := 0.0
	if strings.Contains(f.name, " in 25 s") {
		over = 25
	}
	for _, w := range f.where {
		s = s.Add(begins, over, f.what, w, f.sizes[0])
	}
	begun := int64(-1)
	last := int64(0)
	m.play(t, nil, s, end, false, func(o *Output, l *Line) bool {
		if begun < 0 && o.Record.TimeS >= begins-0.25 {
			begun = o.Record.Turn
		}
		if o.Record.Turn > 0 {
			last = o.Record.Turn
		}
		once := func(list *[]string, what string) {
			if !slices.ContainsFunc(*list, func(x string) bool { return strings.HasPrefix(x, what+" ") }) {
				*list = append(*list, fmt.Sprintf("%s +%d", what, last-begun))
			}
		}
		for _, g := range o.News {
			if g.Grade == verdict.None {
				continue
			}
			if aboutPart(g.Kind) {
				if !slices.ContainsFunc(out.valves, func(x string) bool { return strings.HasPrefix(x, g.Subject+"/"+g.Kind+" "+g.Grade.String()) }) {
					out.text += fmt.Sprintf("turn %d: %s\n", g.Turn, g.Sentence)
				}
				once(&out.valves, g.Subject+"/"+g.Kind+" "+g.Grade.String())
				out.worst = max(out.worst, g.Grade)
			} else {
				n := len(out.named)
				if once(&out.named, g.Subject+"/"+g.Kind); len(out.named) > n {
					out.text += fmt.Sprintf("turn %d: %s\n", g.Turn, g.Sentence)
				}
			}
		}
		for _, tr := range o.Transitions {
			if tr.Kind == sensorKind && tr.To == alarm.Unacked {
				once(&out.named, tr.Key)
				out.text += fmt.Sprintf("turn %d: %s\n", tr.Turn, tr.Sentence)
			}
		}
		return true
	})
	return out
}

// aboutPart tells whether a kind of finding accuses a part of the machine.
func aboutPart(kind string) bool {
	return slices.Contains([]string{verdict.Leaking, verdict.ImpactingHard, verdict.OpeningLate, verdict.Fluttering}, kind)
}
