// Package scenario holds the scripted runs of the modelled machine: what the demo plays and what tests replay. They
// are written against any skid that has a first throw with a head end; everything in them is invented.
package scenario

import (
	"fmt"
	"sort"
	"strings"

	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// Chapter is a stretch of a run with a line for the person who watches.
type Chapter struct {
	At   float64 // s from the first sample
	Text string
}

// Run is a script with its length and its story.
type Run struct {
	Name     string
	About    string
	Script   model.Script
	Duration float64 // s; 0: endless
	Learn    int     // steady turns that a learning run finds in the script's healthy beginning; 0: it has none
	Chapters []Chapter
}

type maker struct {
	about string
	make  func(sk *skid.Skid) Run
}

var runs = map[string]maker{
	"grow":     {"healthy turns to learn from, load swings, then a head-end suction valve begins to leak", grow},
	"swings":   {"a healthy machine whose load moves all the time; it never ends", swings},
	"standing": {"the leak is there from the first turn, and is repaired after two minutes", standing},
	"unsteady": {"as standing, while the load moves all the time", unsteady},
	"broken":   {"as grow, with a piece that breaks out of a discharge valve", ill("broken")},
	"sticking": {"as grow, with discharge valves that stick to their seats", ill("sticking")},
	"rings":    {"as grow, with piston rings that wear", ill("rings")},
	"drifting": {"as grow, with a pressure transmitter whose zero drifts", ill("zero-drift")},
	"slipped":  {"as grow, with a shaft mark that comes 1.5° late", ill("slip")},
}

// Names lists the scenarios.
func Names() []string {
	names := make([]string, 0, len(runs))
	for n := range runs {
		names = append(names, n)
	}
	sort.Strings(names)
	return names
}

// Help lists the scenarios with what happens in them.
func Help() string {
	var b strings.Builder
	for _, n := range Names() {
		fmt.Fprintf(&b, "\n                   %-9s %s", n, runs[n].about)
	}
	return b.String()
}

// Get makes a scenario for a skid.
func Get(name string, sk *skid.Skid) (Run, error) {
	m, ok := runs[name]
	if !ok {
		return Run{}, fmt.Errorf("scenario: there is no %q; choose one of %s", name, strings.Join(Names(), ", "))
	}
	if len(sk.Process.Stages) == 0 {
		return Run{}, fmt.Errorf("scenario: skid %s states no process values: the model needs suction and discharge pressure and suction temperature", sk.ID)
	}
	for _, l := range sk.Process.Stages {
		if !(l.Ps > 0 && l.Pd > l.Ps && l.Ts > 0) {
			return Run{}, fmt.Errorf("scenario: skid %s must state suction and discharge pressure and suction temperature of every stage", sk.ID)
		}
	}
	r := m.make(sk)
	r.Name, r.About = name, m.about
	return r, nil
}

// victim is the valve that fails in the demo: the first suction valve of the first throw's head end.
func victim(sk *skid.Skid) string { return sk.Throws[0].Ends[0].Suction[0].ID }

// duty is one point of the machine's field, as shares of what the skid file states: discharge and suction pressure,
// and the way from rated speed (0) to the slowest the scenario runs (1).
type duty struct{ pd, ps, slow float64 }

// field is a walk through the duties that a learning run must have seen: corners, middles, and back.
var field = []duty{
	{0, 0, 0}, {0.16, 0, 0}, {0.16, 0.1, 0.5}, {0, 0.1, 1}, {-0.16, 0.1, 1}, {-0.16, 0, 0.5}, {-0.16, -0.08, 0}, {0, -0.08, 0.5},
	{0.16, -0.08, 1}, {0.08, 0.05, 0.7}, {-0.08, -0.04, 0.3}, {0.1, 0, 1}, {0, 0, 0.2},
}

// walk visits duties one after the other from at on, share of the way out: a second's change, then a hold.
func walk(s model.Script, sk *skid.Skid, at, each, share float64, through []duty) model.Script {
	l, rpm := sk.Process.Stages[0], sk.Machine.RatedRPM
	slow := max(sk.Machine.MinRPM, rpm*0.85)
	for k, d := range through {
		t := at + float64(k)*each
		s = s.Add(t, 1, model.DischargePressure, "1", l.Pd*(1+share*d.pd)).
			Add(t, 1, model.SuctionPressure, "1", l.Ps*(1+share*d.ps)).
			Add(t, 1, model.Speed, "", rpm+share*d.slow*(slow-rpm))
	}
	return s
}

// second is a load step other than the first that leaves every end at work, or the first step's own code.
func second(sk *skid.Skid) int {
	for _, s := range sk.Steps[1:] {
		if len(s.Idle) == 0 && len(s.Late) == 0 {
			return s.Code
		}
	}
	return sk.Steps[0].Code
}

// slowness stretches a scenario's clock for a slow machine, so that a hold gives it as many turns as the demo machine.
func slowness(sk *skid.Skid) float64 { return max(1, 740/sk.Machine.RatedRPM) }

func grow(sk *skid.Skid) Run {
	f := slowness(sk)
	r := learnt(sk)
	r.Script = r.Script.Add(142*f, 25*f, model.ValveLeak, victim(sk), 30*model.MM2)
	r.Chapters = append(r.Chapters,
		Chapter{142 * f, fmt.Sprintf("Suction valve %s begins to leak: 30 mm² over %.0f s, while the load goes on moving.", victim(sk), 25*f)},
		Chapter{167 * f, "The leak has stopped growing."})
	return r
}

// ill is grow with another fault.
func ill(name string) func(sk *skid.Skid) Run {
	return func(sk *skid.Skid) Run {
		f := slowness(sk)
		r := learnt(sk)
		for _, x := range Faults(sk) {
			if x.Name == name {
				r.Script = x.With(r.Script, 142*f, 25*f)
				r.Chapters = append(r.Chapters, Chapter{142 * f, x.Text})
				return r
			}
		}
		r.Chapters = append(r.Chapters, Chapter{142 * f, "This machine cannot have that fault."})
		return r
	}
}

// learnt is a run with healthy turns to learn from, then load swings that are judged.
func learnt(sk *skid.Skid) Run {
	f := slowness(sk)
	full, part := float64(sk.Steps[0].Code), float64(second(sk))
	s := model.Script{Step: sk.Steps[0].Code}
	s = walk(s, sk, 4*f, 5*f, 1, field) // to 69 f
	s = s.Add(69*f, 0, model.LoadStep, "", part)
	s = walk(s, sk, 69*f, 5*f, 1, field[:9]) // to 114 f
	s = s.Add(114*f, 0, model.LoadStep, "", full)
	// What follows is judged: other ways through the same field.
	s = walk(s, sk, 118*f, 4*f, 0.8, []duty{{0.12, 0.02, 0.3}, {-0.1, 0.06, 0.8}, {0, -0.05, 0}})
	s = s.Add(130*f, 0, model.LoadStep, "", part)
	s = s.Add(138*f, 0, model.LoadStep, "", full)
	s = walk(s, sk, 150*f, 8*f, 0.5, []duty{{0.1, 0, 0}, {-0.1, 0.05, 0.5}, {0, 0, 0}})
	return Run{Script: s, Duration: 195 * f, Learn: 440, Chapters: []Chapter{
		{0, "The machine is declared healthy. Lapwing learns what each measure does as the load moves."},
		{116 * f, "The load moves again: pressures, speed, pockets. The windows follow; nothing may be said."},
	}}
}

func swings(sk *skid.Skid) Run {
	s := model.Script{Step: sk.Steps[0].Code}
	for k := range 60 { // an hour; the model is not for more
		s = walk(s, sk, 4+60*float64(k), 4, 0.8, field)
	}
	return Run{Script: s, Chapters: []Chapter{{0, "A healthy machine under moving load."}}}
}

func standing(sk *skid.Skid) Run {
	s := model.Script{Step: sk.Steps[0].Code}.Add(0, 0, model.ValveLeak, victim(sk), 30*model.MM2).
		Add(120, 2, model.ValveLeak, victim(sk), 0)
	return Run{Script: s, Duration: 240, Chapters: []Chapter{{0, "The leak is there from the start."}, {120, "The valve has been changed."}}}
}

func unsteady(sk *skid.Skid) Run {
	const each, length = 5.0, 200.0
	r := standing(sk)
	for at := 4.0; at < length; at += each * float64(len(field)) {
		r.Script = walk(r.Script, sk, at, each, 0.8, field)
	}
	r.Duration = length
	return r
}
