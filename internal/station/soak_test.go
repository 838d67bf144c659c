package station

import (
	"fmt"
	"testing"

	"lapwing/internal/alarm"
	"lapwing/internal/verdict"
)

// Healthy machines under random load schedules: ratio, speed, suction temperature, pockets, an unloaded end, late
// closing, starts and stops. No alert, and at most one advisory in 20,000 turns. SEED is the first machine, MACHINES
// how many, TURNS how long each is watched; each can be run alone, so that a long soak can be had in pieces.
func TestSoakHealthy(t *testing.T) {
	soakOnly(t, "healthy")
	first, machines, turns := asInt(t, "SEED", 1), asInt(t, "MACHINES", 1), asInt(t, "TURNS", 10000)
	var total soakCount
	for seed := first; seed < first+machines; seed++ {
		t.Run(fmt.Sprint("machine ", seed), func(t *testing.T) { total.add(soakHealthy(t, uint64(seed), turns)) })
	}
	t.Logf("all: %v", total)
	if total.alerts > 0 {
		t.Errorf("%d alerts on healthy machines", total.alerts)
	}
	if allowed := total.turns/20000 + 1; total.advisories > allowed {
		t.Errorf("%d advisories in %d turns, allowed %d", total.advisories, total.turns, allowed)
	}
}

// soakCount is what a soak came to.
type soakCount struct {
	turns, invalid, blocks int64
	advisories, alerts     int64 // findings raised so far, each time anew
	alarms                 int64 // transitions into an alarm
	sensors                int64 // of these, about channels
}

func (c *soakCount) add(d soakCount) {
	c.turns += d.turns
	c.invalid += d.invalid
	c.blocks += d.blocks
	c.advisories += d.advisories
	c.alerts += d.alerts
	c.alarms += d.alarms
	c.sensors += d.sensors
}

func (c soakCount) String() string {
	return fmt.Sprintf("%d turns, %d not valid, %d blocks judged; %d advisories, %d alerts; %d alarms raised, %d of them about channels",
		c.turns, c.invalid, c.blocks, c.advisories, c.alerts, c.alarms, c.sensors)
}

func soakHealthy(t *testing.T, seed uint64, turns int) (c soakCount) {
	m := soakMachine(t, seed, soakSteps...)
	t.Logf("machine %d learnt from %d turns", seed, m.turns)
	s, seconds := roam(begin(m.sk, middle), 4, turns, 1000+seed, soakSteps, true)
	grades := map[string]verdict.Grade{}
	duties := map[string]int{}
	line := m.play(t, nil, s, seconds, false, func(o *Output, l *Line) bool {
		for i := range o.Points {
			duties[fmt.Sprint(o.Points[i].State)]++
		}
		for _, f := range o.News {
			key := f.Subject + "/" + f.Kind
			if f.Grade > grades[key] {
				if f.Grade == verdict.Advisory {
					c.advisories++
				} else {
					c.alerts++
				}
				t.Log(said{o.Record.Turn, o.Record.TimeS, key, f.Grade.String(), f.Sentence})
				if x, ok := l.judge.Explain(); ok {
					t.Log(whyOf(&x, f.Subject, f.Kind))
				}
			}
			grades[key] = f.Grade
		}
		for _, tr := range o.Transitions {
			if tr.To == alarm.Unacked && tr.From != alarm.Unacked {
				c.alarms++
				if tr.Kind == sensorKind {
					c.sensors++
					t.Log(said{o.Record.Turn, o.Record.TimeS, tr.Key, tr.Severity.String(), tr.Sentence})
				}
			}
		}
		return true
	})
	n := line.Count()
	c.turns, c.invalid, c.blocks = n.Turns, n.Invalid, n.Blocks
	t.Logf("machine %d: %v; duties %v; not valid %v", seed, c, duties, n.Reasons)
	return c
}
