package measure

import (
	"lapwing/internal/crank"
	"lapwing/internal/window"
)

// Machine is what the layout of a skid's features depends on.
type Machine struct {
	Throws []Throw

	// N, rated combined rod loads of the frame, tension as a positive number; 0 unknown.
	RatedCompression, RatedTension float64
}

// Throw is one throw as the measures see it.
type Throw struct {
	ID             string // t1
	Stage          int    // throws of one stage share lines; cover temperatures are compared within a stage
	Ends           [2]End
	Acoustic       bool // it has at least one accelerometer
	BlindAtSuction bool // a blind end is connected to suction; otherwise to the atmosphere
}

// End is one end of a cylinder.
type End struct {
	Works     bool // works and has a pressure channel
	Blind     bool // does no work by design
	Suction   []Valve
	Discharge []Valve
}

// Valve is one valve of a group.
type Valve struct {
	ID    string // t1.he.s1
	Cover bool   // its cover temperature is measured
}

// EventName gives the last part of an event's subject, e.g. suction.opens.
func EventName(e window.Event) string {
	switch e {
	case window.DischargeCloses:
		return "discharge.closes"
	case window.SuctionOpens:
		return "suction.opens"
	case window.SuctionCloses:
		return "suction.closes"
	}
	return "discharge.opens"
}

// EndName gives the short name of an end: he or ce.
func EndName(end int) string {
	if end == crank.CE {
		return "ce"
	}
	return "he"
}

// index says where each group of features of a throw begins in the layout; -1 where there is none.
type index struct {
	throw  int
	end    [2]int
	event  [2][window.Events]int
	path   [5]int // in the order of the leak package: HS HD CS CD RG
	covers []cover
}

// cover is a valve whose cover temperature is measured.
type cover struct {
	id        string
	stage     int
	discharge bool
	at        int
}

// NewLayout lists the features of a machine. The order is fixed: by throw; within it the throw, head end, crank end,
// leak paths, events, covers.
func NewLayout(m Machine) Layout {
	l, _ := build(m)
	return l
}

func build(m Machine) (Layout, []index) {
	var l Layout
	var all []index
	for i, th := range m.Throws {
		add := func(subject string, end int, defs []def) int {
			at := len(l)
			for _, d := range defs {
				l = append(l, Feature{Subject: subject, Name: d.name, What: d.what, Class: d.class,
					Throw: i, End: end, Scale: d.scale, Shift: d.shift, Display: d.eye, Flat: d.flat})
			}
			return at
		}
		none := [window.Events]int{-1, -1, -1, -1}
		ix := index{end: [2]int{-1, -1}, event: [2][window.Events]int{none, none}, path: [5]int{-1, -1, -1, -1, -1}}
		td, ed, vd, pd, cd := throwDefs(), endDefs(), eventDefs(), pathDefs(), coverDefs()
		ix.throw = add(th.ID, -1, td[:])
		for e := range th.Ends {
			if th.Ends[e].Works {
				ix.end[e] = add(th.ID+"."+EndName(e), e, ed[:])
			}
		}
		for e := range th.Ends {
			if th.Ends[e].Works {
				ix.path[2*e] = add(th.ID+"."+EndName(e)+".suction", e, pd[:])
				ix.path[2*e+1] = add(th.ID+"."+EndName(e)+".discharge", e, pd[:])
			}
		}
		if th.Ends[0].Works && th.Ends[1].Works {
			ix.path[4] = add(th.ID+".rings", -1, pd[:])
		}
		for e := range th.Ends {
			for k := range window.Event(window.Events) {
				if th.Acoustic && th.Ends[e].Works {
					defs := vd[:impactFeatures]
					if opening(k) {
						defs = vd[:]
					}
					ix.event[e][k] = add(th.ID+"."+EndName(e)+"."+EventName(k), e, defs)
				}
			}
		}
		for e := range th.Ends {
			for d, group := range [2][]Valve{th.Ends[e].Suction, th.Ends[e].Discharge} {
				for _, v := range group {
					if v.Cover {
						ix.covers = append(ix.covers, cover{v.ID, th.Stage, d == 1, add(v.ID, e, cd[:])})
					}
				}
			}
		}
		all = append(all, ix)
	}
	return l, all
}
