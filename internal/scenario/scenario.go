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

// swing moves the first stage's discharge pressure, the suction pressure and the speed through their range in one
// round of the given length; share scales how far.
func swing(s model.Script, sk *skid.Skid, at, round, share float64) model.Script {
	l, rpm := sk.Process.Stages[0], sk.Machine.RatedRPM
	slow := max(sk.Machine.MinRPM, rpm*0.85)
	leg := round / 6
	pd := func(x float64) float64 { return l.Pd * (1 + share*x) }
	ps := func(x float64) float64 { return l.Ps * (1 + share*x) }
	return s.
		Add(at, leg, model.DischargePressure, "1", pd(0.16)).
		Add(at+leg, leg, model.Speed, "", rpm+share*(slow-rpm)).
		Add(at+2*leg, leg, model.DischargePressure, "1", pd(-0.16)).
		Add(at+2.5*leg, leg, model.SuctionPressure, "1", ps(0.10)).
		Add(at+3.5*leg, leg, model.Speed, "", rpm).
		Add(at+4*leg, leg, model.SuctionPressure, "1", ps(-0.08)).
		Add(at+4.5*leg, leg, model.DischargePressure, "1", pd(0)).
		Add(at+5*leg, leg, model.SuctionPressure, "1", ps(0))
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

func grow(sk *skid.Skid) Run {
	full, part := float64(sk.Steps[0].Code), float64(second(sk))
	s := model.Script{Step: sk.Steps[0].Code}
	s = swing(s, sk, 4, 24, 1)
	s = swing(s, sk, 28, 24, 0.6)
	s = s.Add(54, 0, model.LoadStep, "", part)
	s = swing(s, sk, 56, 24, 1)
	s = s.Add(82, 0, model.LoadStep, "", full)
	// What follows is judged: other paths through the same region.
	s = swing(s, sk, 90, 18, 0.8)
	s = s.Add(110, 0, model.LoadStep, "", part).Add(118, 0, model.LoadStep, "", full)
	s = s.Add(126, 30, model.ValveLeak, victim(sk), 30*model.MM2)
	s = swing(s, sk, 132, 24, 0.5)
	return Run{Script: s, Duration: 175, Chapters: []Chapter{
		{0, "The machine is declared healthy. Lapwing learns what each measure does as the load moves."},
		{88, "Learnt. The load swings again: pressures, speed, pockets. Watch the windows follow."},
		{126, "Suction valve " + victim(sk) + " begins to leak: 30 mm² over half a minute."},
		{158, "The leak has stopped growing."},
	}}
}

func swings(sk *skid.Skid) Run {
	s := model.Script{Step: sk.Steps[0].Code}
	for k := range 200 { // more than a day's watching is not what the model is for
		s = swing(s, sk, 5+30*float64(k), 30, 0.8)
	}
	return Run{Script: s, Chapters: []Chapter{{0, "A healthy machine under swinging load."}}}
}

func standing(sk *skid.Skid) Run {
	s := model.Script{Step: sk.Steps[0].Code}.Add(0, 0, model.ValveLeak, victim(sk), 30*model.MM2).
		Add(120, 2, model.ValveLeak, victim(sk), 0)
	return Run{Script: s, Duration: 240, Chapters: []Chapter{{0, "The leak is there from the start."}, {120, "The valve has been changed."}}}
}
