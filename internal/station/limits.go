package station

import (
	"fmt"
	"slices"
	"strings"

	"lapwing/internal/alarm"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// limitWatch is the limits of the skid file on one measure, bound to its feature.
type limitWatch struct {
	alarm.Ladder
	feature int
	unless  []string // duty states of its throw in which it is suppressed by design
}

func limitWatches(sk *skid.Skid, layout measure.Layout) (out []limitWatch, err error) {
	if err := sk.CheckLimits(func(subject string) []string { return namesOf(layout, subject) }); err != nil {
		return nil, err
	}
	for _, l := range sk.Limits {
		i := layout.Find(l.Subject, l.Measure)
		if i < 0 {
			return nil, fmt.Errorf("station: limit on %s %s: there is no such measure", l.Subject, l.Measure)
		}
		a := alarm.Limit{Subject: l.Subject, Measure: l.Measure, What: layout[i].What, Unit: unitOf(l.Measure), High: l.High, Low: l.Low, Deadband: l.Deadband, Next: limitNext(l.Measure)}
		if err := a.Severity.UnmarshalText([]byte(l.Severity)); err != nil {
			return nil, fmt.Errorf("station: limit on %s %s: %w", l.Subject, l.Measure, err)
		}
		at := slices.IndexFunc(out, func(w limitWatch) bool { return w.feature == i })
		if at < 0 {
			at, out = len(out), append(out, limitWatch{feature: i, unless: l.Unless})
		}
		w := &out[at]
		w.Ladder = append(w.Ladder, a)
		w.unless = slices.DeleteFunc(slices.Clone(w.unless), func(s string) bool { return !slices.Contains(l.Unless, s) }) // in doubt it is shown
	}
	return out, nil
}

func namesOf(layout measure.Layout, subject string) (out []string) {
	for i := range layout {
		if layout[i].Subject == subject {
			out = append(out, layout[i].Name)
		}
	}
	return out
}

// AlarmTiming gives the delays of every point: limits as the skid file says; findings come after several blocks that
// agree, so they need no on-delay, and go only after a minute without their evidence. Limits that share a point have the
// shortest of their delays to come and the longest to go, and latch if one of them does.
func AlarmTiming(sk *skid.Skid) alarm.Config {
	c := alarm.Config{Default: alarm.Timing{OffDelay: findingOffDelay}, Points: map[string]alarm.Timing{}}
	for _, l := range sk.Limits {
		a := alarm.Limit{Subject: l.Subject, Measure: l.Measure}
		t := alarm.Timing{OnDelay: l.OnDelay, OffDelay: l.OffDelay, OnTurns: l.OnTurns, OffTurns: l.OffTurns, Latch: l.Latch}
		for _, key := range []string{a.HighKey(), a.LowKey()} {
			if o, shared := c.Points[key]; shared {
				t = alarm.Timing{OnDelay: min(o.OnDelay, t.OnDelay), OffDelay: max(o.OffDelay, t.OffDelay), OnTurns: min(o.OnTurns, t.OnTurns),
					OffTurns: max(o.OffTurns, t.OffTurns), Latch: o.Latch || t.Latch}
			}
			c.Points[key] = t
		}
	}
	return c
}

// limitConditions judges the limits of a turn. They are absolute: they need no baseline and regard no duty, save where
// the file says so.
func (l *Line) limitConditions(conds []alarm.Condition, t *turn.Turn) []alarm.Condition {
	for i := range l.limits {
		w := &l.limits[i]
		f := &l.layout[w.feature]
		design := ""
		if state := l.points[f.Throw].State.String(); slices.Contains(w.unless, state) {
			design = fmt.Sprintf("throw %s is %s: suppressed there by the skid file", l.sk.Throws[f.Throw].ID, state)
		}
		conds = w.Conditions(conds, l.vec.V[w.feature]*f.Scale+f.Shift, l.alarms.Level, design, t.Number, t.Seq0, t.Seq1)
	}
	return conds
}

var unitSigns = []struct{ suffix, sign string }{{"_bar_abs", "bar abs"}, {"_bar", "bar"}, {"_percent", "%"}, {"_kg_h", "kg/h"}, {"_nm3_h", "Nm³/h"}, {"_kn", "kN"}, {"_kw", "kW"},
	{"_mm2", "mm²"}, {"_deg", "°"}, {"_rpm", "rpm"}, {"_db", "dB"}, {"_ms", "ms"}, {"_g", "g"}, {"_c", "°C"}, {"_k", "K"}, {"_j", "J"}}

// unitOf gives the sign of the unit that a measure's name states.
func unitOf(name string) string {
	for _, u := range unitSigns {
		if strings.HasSuffix(name, u.suffix) {
			return u.sign
		}
	}
	return ""
}

// limitNext is what people usually do next about a limit: first whether the number is true, then what moved it.
func limitNext(name string) []string {
	const last = "whoever goes to the machine: isolate, depressurise and lock out first; follow site permits, local codes and licensed practice"
	switch {
	case strings.HasPrefix(name, "rod_load"), strings.HasPrefix(name, "gas_load"):
		return []string{"compare suction and discharge pressure with what the load step is rated for",
			"look whether one end's pressure or its sensor has changed: lapwing why on the throw",
			"if the load is real, bring the pressure ratio or the load step back inside the rating by the site's procedure", last}
	case strings.HasPrefix(name, "reversal"):
		return []string{"look whether a valve of one end leaks or an unloader holds it open: that takes the reversal away",
			"compare with what the maker asks for at this load step; the pin and its bushing are lubricated by the reversal",
			"change the load step or stop by the site's procedure if it stays", last}
	case strings.HasPrefix(name, "t_"), strings.HasSuffix(name, "_k"), strings.HasSuffix(name, "_c"):
		return []string{"compare with the other thermometers of the stage and with the adiabatic temperature of this ratio",
			"look for a leaking valve (lapwing why on the throw), a hot suction, a fouled cooler", last}
	case strings.HasSuffix(name, "_g"):
		return []string{"compare with the other accelerometers and with the same event of the other end",
			"pull the clip and look whether the impact stands in a valve event or beside one (liquid, a loose part)", last}
	}
	return []string{"look whether the number is true: its sensor, its neighbours", last}
}
