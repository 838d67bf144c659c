package verdict

import (
	"slices"
	"strings"
)

const (
	caution    = "Before anyone touches a valve, cover or transducer: stop, isolate, depressurise, vent and lock out; follow the site's permits, local codes and licensed practice. Lapwing is a monitor, not a protection system."
	noHotWork  = "Hazardous-area rules decide what may be brought to the skid; covers and discharge pipes are hot."
	planRepair = "Plan to inspect this group at the next suitable stop; take the spare valves and gaskets of this group along."
)

// advice says what would settle a finding and what people usually do next.
func advice(c *trial, f *Finding) (settle, next []string) {
	switch c.kind {
	case Leaking:
		switch {
		case c.h == hRings:
			settle = []string{"Both ends show the same pattern and the discharge gas runs warmer: a ring leak. A valve leak shows on one end.",
				"Compare at another load step: the pattern of rings stays with both ends."}
			if len(f.Ambiguous) > 0 {
				settle[0] = "With late closing on both ends leaking rings read as suction leaks of both ends alike; warmer discharge gas suggests the rings."
			}
			next = []string{"Trend it over days; check the lubricator's feed and the liner at the next suitable stop."}
		case c.packing():
			settle = []string{"Look at the packing vent's flow or temperature: a packing leak shows there, a valve leak does not.",
				"A valve leak would raise the noise floor while closed and warm the gas."}
			next = []string{"Gas may be at the packing vent and the distance piece: check gas detection and venting before going near."}
		default:
			settle = []string{"The cover temperatures of this group, taken with a suitable thermometer on the running machine by authorised people, name the valve.",
				"Compare at another load step: a leak stays with its group, a sensor's error moves with its channel."}
			if slices.ContainsFunc(f.Ambiguous, func(s string) bool { return strings.HasSuffix(s, ".rings") }) {
				settle = append(settle, "At this load step leaking rings read as suction valves. Both ends alike suggest the rings; a load step with both ends at work and no late closing tells them apart.")
			}
			if slices.ContainsFunc(f.Ambiguous, func(s string) bool { return strings.HasSuffix(s, ".packing") }) {
				settle = append(settle, "Look at the packing vent's flow or temperature: a packing leak shows there, a valve leak does not.")
			}
			next = []string{planRepair}
			if f.Grade == Danger {
				next = []string{"The loss is large: ask the machinery engineer now whether the machine should be unloaded or stopped.", planRepair}
			}
		}
		if f.Grade == Advisory {
			next = append([]string{"Not sure enough yet: watch it, do not open the machine on this alone."}, next...)
		}
	case ImpactingHard:
		settle = []string{"See whether the same group starts to leak: a broken plate does.", "Look at the raw trace of the opening for extra hits."}
		next = []string{planRepair}
	case OpeningLate:
		settle = []string{"Watch the valve loss and the lag over a load change: sticking by oil or dirt changes with temperature."}
		next = []string{"Check oil feed and liquid carry-over; inspect for deposits at the next suitable stop."}
	case Fluttering:
		settle = []string{"Compare at full flow: a valve that flutters only at low flow has springs too strong for that duty.",
			"Look at the raw trace after the opening for repeated hits."}
		next = []string{"Check whether gas or duty have moved away from what the valve springs were chosen for; fluttering wears plates and springs.", planRepair}
	case DeadCentre:
		settle = []string{"Check the shaft mark and its gap, and repeat the dead-centre proof of the walkdown."}
		next = []string{"Until then the pressures of this throw accuse no valve."}
	case PressureZero:
		settle = []string{"Compare the channel with the line pressure on an idle end, or zero it against a known pressure at the next stop."}
		next = []string{"Check the transducer and its passage; until then this channel accuses no valve."}
	case Clearance:
		settle = []string{"Is a clearance pocket where the load step says it is? Look at its actuator and seat."}
		next = []string{"Check for liquid, deposits, or a pocket valve that does not close; until then this end's pressures accuse no valve."}
	case GasChanged:
		settle = []string{"Compare the gas analysis with the one the baseline was learnt with."}
		next = []string{"Enter the new gas or learn anew; until then the pressures accuse no valve."}
	case AccelGain:
		settle = []string{"Check mounting, cable and sensitivity of the accelerometer."}
		next = []string{"Until then its vibration counts for nothing."}
	}
	next = append(next, caution, noHotWork)
	return settle, next
}
