package model

import (
	"fmt"

	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/gas"
	"lapwing/internal/skid"
)

// valves makes n valves of a group.
func valves(end string, letter string, n int) []skid.Valve {
	var out []skid.Valve
	for i := range n {
		id := fmt.Sprintf("%s.%s%d", end, letter, i+1)
		out = append(out, skid.Valve{ID: id, Cover: id})
	}
	return out
}

// bench is a skid built in code: n equal double-acting throws, opposed, nv valves a group, one phase mark, two
// pressures and one accelerometer a throw.
func bench(cyl crank.Cylinder, rpm, ps, pd, ts float64, g gas.Fixed, n, nv int) *skid.Skid {
	sk := &skid.Skid{ID: "bench", Gas: skid.Gas{Name: "bench gas", Fixed: &g}}
	sk.Machine = skid.Machine{RatedRPM: rpm, MinRPM: rpm / 2, MaxRPM: rpm * 1.4, Atmosphere: 101325}
	sk.Phase = skid.Phase{Channel: "mark", MarksPerTurn: 1, AutoLevel: true}
	sk.Channels = append(sk.Channels, skid.Channel{ID: "mark", Input: 0, Kind: skid.PhaseMark, VoltsFull: 10, Gain: 1, Min: -10, Max: 10})
	sk.Steps = []skid.Step{{Code: 0, Name: "full"},
		{Code: 1, Name: "pockets", Pocket: map[string]float64{"t1.he": 0.3}},
		{Code: 2, Name: "t1 head end idle", Idle: map[string]bool{"t1.he": true}},
		{Code: 3, Name: "late", Late: map[string]float64{"t1.he": 60, "t1.ce": 60}}}
	sk.Process = skid.Process{Known: true, Stages: []skid.Line{{Ps: ps, Pd: pd, Ts: ts}}}
	in := 1
	for i := range n {
		t := skid.Throw{ID: fmt.Sprintf("t%d", i+1), Stage: 1, DeadCentre: 37 + 180*float64(i), Cylinder: cyl}
		for e, name := range []string{"he", "ce"} {
			end := t.ID + "." + name
			t.Ends[e] = skid.End{Works: true, Pressure: "p." + end, Suction: valves(end, "s", nv), Discharge: valves(end, "d", nv)}
			sk.Channels = append(sk.Channels, skid.Channel{ID: "p." + end, Input: in, Kind: skid.Pressure, VoltsFull: 10,
				ZeroV: 1, Gain: pd * 2 / 4, Min: 0, Max: pd * 2, Passage: 900, PassageQ: 9})
			in++
		}
		t.Accel = []string{"a." + t.ID}
		sk.Channels = append(sk.Channels, skid.Channel{ID: "a." + t.ID, Input: in, Kind: skid.Acceleration, VoltsFull: 10,
			Gain: 98.0665, Min: -490, Max: 490})
		in++
		sk.Throws = append(sk.Throws, t)
	}
	return sk
}

// demo is a two-throw biomethane machine, near what the example skid describes.
func demo() *skid.Skid {
	return bench(crank.Cylinder{Bore: 0.26, Stroke: 0.15, ConRod: 0.38, PistonRod: 0.055, Clearance: [2]float64{0.16, 0.18},
		MassPiston: 70, MassCrosshead: 50}, 740, 8e5, 22e5, 303, methane(), 2, 2)
}

// single is its first throw alone: half the work.
func single() *skid.Skid {
	sk := demo()
	sk.Throws, sk.Channels = sk.Throws[:1], sk.Channels[:4]
	return sk
}

func methane() gas.Fixed { return gas.Fixed{M: 0.01604, Zs: 0.985, Zd: 0.985, KV: 1.29, KT: 1.27} }

// fill runs a machine for some seconds and gives the last block.
func fill(m *Machine, seconds float64) *acq.Block {
	var b acq.Block
	m.Fill(&b, int(seconds*m.rate))
	return &b
}
