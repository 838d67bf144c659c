package scenario

import (
	"fmt"

	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// Fault is one thing that goes wrong on a machine's first throw, in the size at which people would want to hear of it.
type Fault struct {
	Name    string
	Text    string         // for the person who watches
	Subject string         // group, throw or channel that has it; "phase" for the shaft reference, "process" for the readings
	Sensor  bool           // the machine is sound and an instrument is not
	Changes []model.Change // at 0 and at once; With moves them
}

// With adds the fault to a script: from at seconds on, growing over some seconds where a fault grows.
func (f Fault) With(s model.Script, at, over float64) model.Script {
	for _, c := range f.Changes {
		if !grows(c.What) {
			over = 0
		}
		s = s.Add(at, over, c.What, c.Where, c.To)
	}
	return s
}

// grows tells what comes slowly from what happens in an instant.
func grows(w model.What) bool {
	switch w {
	case model.ValveLeak, model.RingLeak, model.PackingLeak, model.Sticky, model.Gummed, model.Springs, model.PressureZero, model.PressureGain, model.AccelGain, model.Noisy:
		return true
	}
	return false
}

// Faults lists the faults that the first throw of a skid can have. The head end (or the only working end) has those of
// the valves.
func Faults(sk *skid.Skid) []Fault {
	t := &sk.Throws[0]
	side := 0
	if !t.Ends[0].Works {
		side = 1
	}
	end, name := t.Ends[side], sk.EndName(0, side)
	suction, disch := end.Suction[0].ID, end.Discharge[0].ID
	all := func(vs []skid.Valve, w model.What, to float64) (out []model.Change) {
		for _, v := range vs {
			out = append(out, model.Change{What: w, Where: v.ID, To: to})
		}
		return out
	}
	one := func(w model.What, where string, to float64) []model.Change {
		return []model.Change{{What: w, Where: where, To: to}}
	}
	out := []Fault{
		{"suction-leak", fmt.Sprintf("Suction valve %s begins to leak.", suction), name + ".suction", false, one(model.ValveLeak, suction, 30*model.MM2)},
		{"discharge-leak", fmt.Sprintf("Discharge valve %s begins to leak.", disch), name + ".discharge", false, one(model.ValveLeak, disch, 30*model.MM2)},
		{"broken", fmt.Sprintf("A piece of the plate of %s breaks out.", disch), name + ".discharge", false, one(model.Missing, disch, 0.04)},
		{"cracked", fmt.Sprintf("The plate of %s cracks: still tight, but it hits harder.", disch), name + ".discharge", false, one(model.Broken, disch, 0.7)},
		{"sticking", fmt.Sprintf("Oil makes the discharge valves of %s stick to their seats.", name), name + ".discharge", false, all(end.Discharge, model.Sticky, 0.1)},
		{"gummed", fmt.Sprintf("Deposits make the discharge valves of %s stick to their stops.", name), name + ".discharge", false, all(end.Discharge, model.Gummed, 0.006)},
		{"weak-springs", fmt.Sprintf("The springs of the suction valves of %s have lost their force.", name), name + ".suction", false, all(end.Suction, model.Springs, 0.35)},
		{"flutter", fmt.Sprintf("The discharge valves of %s have got springs that are too stiff: they flutter.", name), name + ".discharge", false, all(end.Discharge, model.Springs, 4)},
		{"rings", fmt.Sprintf("The rings of %s wear.", t.ID), t.ID + ".rings", false, one(model.RingLeak, t.ID, 40*model.MM2)},
	}
	if t.Ends[1].Works {
		out = append(out, Fault{"packing", fmt.Sprintf("The packing of %s begins to leak.", t.ID), t.ID + ".packing", false, one(model.PackingLeak, t.ID, 20*model.MM2)})
	}
	instrument := func(name, text, subject string, changes []model.Change) {
		out = append(out, Fault{name, text, subject, true, changes})
	}
	if p := end.Pressure; p != "" {
		ps := 0.0
		if len(sk.Process.Stages) > 0 {
			ps = sk.Process.Stages[0].Ps
		}
		instrument("zero-drift", fmt.Sprintf("The zero of pressure transmitter %s drifts away.", p), p, one(model.PressureZero, p, 0.1*ps))
		instrument("sensitivity", fmt.Sprintf("Pressure transmitter %s reads 5 %% too much.", p), p, one(model.PressureGain, p, 1.05))
		instrument("open-pressure", fmt.Sprintf("The cable of %s comes loose.", p), p, one(model.OpenCircuit, p, 1))
		instrument("flat-pressure", fmt.Sprintf("The reading of %s stands still.", p), p, one(model.Flat, p, 1))
		instrument("clipped-pressure", fmt.Sprintf("The amplifier of %s cuts the peaks off.", p), p, one(model.Clip, p, clipAt(sk, p)))
		if q := t.Ends[1-side].Pressure; q != "" {
			instrument("swapped", fmt.Sprintf("Somebody has exchanged the cables of %s and %s.", p, q), p, one(model.Swapped, p+" "+q, 1))
		}
	}
	if len(t.Accel) > 0 {
		a := t.Accel[0]
		instrument("dull-accelerometer", fmt.Sprintf("Accelerometer %s has come off its stud: half of what it was.", a), a, one(model.AccelGain, a, 0.4))
		instrument("open-accelerometer", fmt.Sprintf("The cable of %s comes loose.", a), a, one(model.OpenCircuit, a, 1))
		instrument("clipped-accelerometer", fmt.Sprintf("The amplifier of %s cuts the peaks off.", a), a, one(model.Clip, a, 0.02))
	}
	instrument("slip", "The pick-up has been moved: the mark comes 1.5° later.", "phase", one(model.PhaseSlip, "", 1.5))
	instrument("extra-pulses", "Every tenth turn has a pulse too many.", "phase", one(model.ExtraPulses, "", 0.1))
	instrument("missed-pulses", "Every tenth mark is missed.", "phase", one(model.MissedPulses, "", 0.1))
	instrument("frozen-process", "The process values stand still.", "process", one(model.FrozenProcess, "", 1))
	return out
}

// clipAt is a level in the upper part of a pressure's stroke, as a share of its converter's full scale.
func clipAt(sk *skid.Skid, id string) float64 {
	c, _ := sk.ChannelByID(id)
	if len(sk.Process.Stages) == 0 || c.Gain == 0 || c.VoltsFull == 0 {
		return 0.2
	}
	l := sk.Process.Stages[0]
	return (c.ZeroV + (l.Ps+0.8*(l.Pd-l.Ps))/c.Gain) / c.VoltsFull
}
