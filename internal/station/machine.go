package station

import (
	"fmt"
	"slices"

	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/measure"
	"lapwing/internal/ripple"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/verdict"
)

// What each room is told of the machine, from the skid file.

func frameConfig(sk *skid.Skid, info acq.Info) frame.Config {
	ch, _ := sk.ChannelByID(sk.Phase.Channel)
	perCount := ch.VoltsFull / float64(int64(1)<<(info.Bits-1))
	c := frame.Config{Rate: info.Rate, Inputs: info.Channels, Channel: ch.Input, Auto: sk.Phase.AutoLevel, Threshold: sk.Phase.Threshold / perCount,
		Hysteresis: sk.Phase.Hysteresis / perCount, Wheel: sk.Phase.Wheel}
	if sk.Phase.Falling {
		c.Edge = frame.Falling
	}
	if sk.Phase.Index != "" {
		once, _ := sk.ChannelByID(sk.Phase.Index)
		c.Index = once.Input
	}
	if sk.Machine.MaxRPM > 0 {
		c.MaxRPM = 1.5 * sk.Machine.MaxRPM
	}
	return c
}

func turnConfig(sk *skid.Skid, info acq.Info) turn.Config {
	c := turn.Config{Rate: info.Rate, Step: sk.Detection.GridDeg, Marks: turn.Marks{U: sk.Phase.Uncertainty},
		ImpactBand: sk.Detection.ImpactBand, LeakBand: sk.Detection.LeakBand}
	c.Marks.Inner = sk.Phase.Wheel.Angles()
	c.Marks.Ripple = harmonics(sk.Phase.Ripple)
	channel := func(id string) turn.Channel {
		ch, ok := sk.ChannelByID(id)
		if !ok {
			return turn.None()
		}
		gain, offset := ch.Scale(info.Bits)
		return turn.Channel{ID: ch.ID, Input: ch.Input, Gain: gain, Offset: offset, Min: ch.Min, Max: ch.Max, Passage: turn.Passage{Hz: ch.Passage, Q: ch.PassageQ}}
	}
	for i := range sk.Throws {
		t := &sk.Throws[i]
		tc := turn.ThrowConfig{DeadCentreDeg: t.DeadCentre}
		for e := range t.Ends {
			tc.Pressure[e] = turn.None()
			if t.Ends[e].Works {
				tc.Pressure[e] = channel(t.Ends[e].Pressure)
			}
		}
		for _, a := range t.Accel {
			tc.Accel = append(tc.Accel, channel(a))
		}
		c.Throws = append(c.Throws, tc)
	}
	return c
}

func harmonics(list []skid.Ripple) (out []turn.Ripple) {
	for _, r := range list {
		out = append(out, turn.Ripple{Order: r.Order, Amp: r.Amp, PhaseDeg: r.Phase})
	}
	return out
}

// manyMarks per turn leave no room for a ripple to matter: none is computed then.
const manyMarks = 6

// rippleBook is what is known of the ripple at each load step; nil when the one of the phase reference is all.
func rippleBook(sk *skid.Skid, marks int) (*ripple.Book, error) {
	own := map[int][]turn.Ripple{}
	for _, s := range sk.Steps {
		if s.Ripple != nil {
			own[s.Code] = harmonics(s.Ripple)
		}
	}
	general := harmonics(sk.Phase.Ripple)
	c := ripple.Config{U: sk.Phase.Uncertainty, At: func(step int) []turn.Ripple {
		if r, ok := own[step]; ok {
			return r
		}
		return general
	}}
	computes := sk.ComputesRipple() && marks < manyMarks
	if !computes && len(own) == 0 {
		return nil, nil
	}
	if computes {
		m := ripple.Machine{Inertia: sk.Machine.Inertia, Atmosphere: sk.Machine.Atmosphere}
		for i := range sk.Throws {
			t := &sk.Throws[i]
			m.Throws = append(m.Throws, ripple.Throw{Cylinder: t.Cylinder, DeadCentreDeg: t.DeadCentre,
				Works: [2]bool{t.Ends[crank.HE].Works, t.Ends[crank.CE].Works}, BlindAtSuction: t.BlindAtSuction})
		}
		var err error
		if c.Torque, err = ripple.NewTorque(m); err != nil {
			return nil, err
		}
	}
	return ripple.NewBook(c), nil
}

func measureMachine(sk *skid.Skid) measure.Machine {
	m := measure.Machine{RatedCompression: sk.Machine.RodLoadCompression, RatedTension: sk.Machine.RodLoadTension}
	valves := func(vs []skid.Valve) (out []measure.Valve) {
		for _, v := range vs {
			out = append(out, measure.Valve{ID: v.ID, Cover: v.Cover != ""})
		}
		return out
	}
	for i := range sk.Throws {
		t := &sk.Throws[i]
		mt := measure.Throw{ID: t.ID, Stage: t.Stage, Acoustic: len(t.Accel) > 0, BlindAtSuction: t.BlindAtSuction}
		for e := range t.Ends {
			mt.Ends[e] = measure.End{Works: t.Ends[e].Works && t.Ends[e].Pressure != "", Blind: !t.Ends[e].Works, Suction: valves(t.Ends[e].Suction), Discharge: valves(t.Ends[e].Discharge)}
		}
		m.Throws = append(m.Throws, mt)
	}
	return m
}

// judgeChannels names the sensors, so that a finding against one names it.
func judgeChannels(sk *skid.Skid) (out []verdict.ThrowChannel) {
	for i := range sk.Throws {
		t := &sk.Throws[i]
		c := verdict.ThrowChannel{Pressure: [2]string{t.Ends[crank.HE].Pressure, t.Ends[crank.CE].Pressure}}
		if len(t.Accel) > 0 {
			c.Accel = t.Accel[0]
		}
		out = append(out, c)
	}
	return out
}

func works(sk *skid.Skid) (out [][2]bool) {
	for i := range sk.Throws {
		t := &sk.Throws[i]
		out = append(out, [2]bool{t.Ends[crank.HE].Works, t.Ends[crank.CE].Works})
	}
	return out
}

func dutySteps(sk *skid.Skid, throw int) (out []duty.Step) {
	for _, s := range sk.Steps {
		var idle [2]bool
		for e := range idle {
			idle[e] = !sk.Throws[throw].Ends[e].Works || s.Idle[sk.EndName(throw, e)] // the windows call a blind end idle too
		}
		out = append(out, duty.Step{Code: s.Code, Idle: idle})
	}
	return out
}

// clearances lists what each end's clearance may be, each value once.
func clearances(sk *skid.Skid) [][2][]float64 {
	out := make([][2][]float64, len(sk.Throws))
	for i := range out {
		for _, s := range sk.Steps {
			for e, c := range sk.CylinderAt(i, s.Code).Clearance {
				if !slices.Contains(out[i][e], c) {
					out[i][e] = append(out[i][e], c)
				}
			}
		}
	}
	return out
}

func stepCodes(sk *skid.Skid) (out []int) {
	for _, s := range sk.Steps {
		out = append(out, s.Code)
	}
	return out
}

// checkMachine says what the line cannot do without.
func checkMachine(sk *skid.Skid) error {
	for i := range sk.Throws {
		for e := range sk.Throws[i].Ends {
			if sk.Throws[i].Ends[e].Works && sk.Throws[i].Ends[e].Pressure != "" {
				return nil
			}
		}
	}
	return fmt.Errorf("station: skid %s has no cylinder pressure channel: there is nothing to follow a valve by", sk.ID)
}
