package station

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// limitWatch is a limit of the skid file bound to its feature.
type limitWatch struct {
	alarm.Limit
	feature int
}

func limitWatches(sk *skid.Skid, layout measure.Layout) (out []limitWatch, err error) {
	if err := sk.CheckLimits(func(subject string) []string { return namesOf(layout, subject) }); err != nil {
		return nil, err
	}
	for _, l := range sk.Limits {
		i := layout.Find(l.Subject, l.Measure)
		var sev alarm.Severity
		if err := sev.UnmarshalText([]byte(l.Severity)); err != nil {
			return nil, fmt.Errorf("station: limit on %s %s: %w", l.Subject, l.Measure, err)
		}
		out = append(out, limitWatch{feature: i, Limit: alarm.Limit{Subject: l.Subject, Measure: l.Measure, High: l.High, Low: l.Low, Deadband: l.Deadband, Severity: sev}})
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

// findingOffDelay is how long the evidence must be gone before a finding's alarm returns.
const findingOffDelay = time.Minute

// AlarmTiming gives the delays of every point: limits as the skid file says; findings come after several blocks that
// agree, so they need no on-delay, and go only after a minute without their evidence.
func AlarmTiming(sk *skid.Skid) alarm.Config {
	c := alarm.Config{Default: alarm.Timing{OffDelay: findingOffDelay}, Points: map[string]alarm.Timing{}}
	for _, l := range sk.Limits {
		a := alarm.Limit{Subject: l.Subject, Measure: l.Measure}
		t := alarm.Timing{OnDelay: l.OnDelay, OffDelay: l.OffDelay}
		c.Points[a.HighKey()], c.Points[a.LowKey()] = t, t
	}
	return c
}

func (l *Line) limitConditions(conds []alarm.Condition, t *turn.Turn) []alarm.Condition {
	for i := range l.limits {
		w := &l.limits[i]
		f := &l.layout[w.feature]
		conds = w.Conditions(conds, l.vec.V[w.feature]*f.Scale+f.Shift, l.alarms.Standing, t.Number, t.Seq0, t.Seq1)
	}
	return conds
}

// findingConditions turns a throw's findings after a block into conditions. An open point of the throw that has no
// finding is told that its condition is gone, but only once the judge has heard enough since the start to know.
func (l *Line) findingConditions(conds []alarm.Condition, throw int, b *duty.Block, findings []verdict.Finding) []alarm.Condition {
	var said []string
	for i := range findings {
		f := &findings[i]
		key := f.Subject + "/" + f.Kind
		said = append(said, key)
		conds = append(conds, alarm.Condition{Key: key, Subject: f.Subject, Kind: f.Kind, Severity: severity(f.Grade), Known: true,
			Sentence: f.Sentence, Detail: wire.FromFinding(f, l.layout), Turn: f.Turn, Seq0: f.Seq0, Seq1: f.Seq1})
	}
	for _, p := range l.alarms.Points() {
		if slices.Contains(said, p.Key) || strings.Count(p.Key, "/") != 1 || p.Kind == sensorKind {
			continue
		}
		t, ends := l.owner(p.Subject)
		if t != throw {
			continue
		}
		known := true
		for _, e := range ends {
			known = known && l.judge.Ready(throw, e)
		}
		conds = append(conds, alarm.Condition{Key: p.Key, Subject: p.Subject, Kind: p.Kind, Known: known,
			Sentence: p.Subject + " " + p.Kind + ": the evidence is gone", Turn: b.Turn1, Seq0: b.Seq0, Seq1: b.Seq1})
	}
	return conds
}

// owner says which throw and ends a finding's subject belongs to; -1 when to none.
func (l *Line) owner(subject string) (throw int, ends []int) {
	for i := range l.sk.Throws {
		t := &l.sk.Throws[i]
		for e := range t.Ends {
			name := l.sk.EndName(i, e)
			if t.Ends[e].Works && (subject == name || subject == t.Ends[e].Pressure || strings.HasPrefix(subject, name+".")) {
				return i, []int{e}
			}
		}
		if subject == t.ID || strings.HasPrefix(subject, t.ID+".") || slices.Contains(t.Accel, subject) {
			for e := range t.Ends {
				if t.Ends[e].Works {
					ends = append(ends, e)
				}
			}
			return i, ends
		}
	}
	return -1, nil
}

func severity(g verdict.Grade) alarm.Severity {
	switch g {
	case verdict.Advisory:
		return alarm.Advisory
	case verdict.Alert:
		return alarm.Alert
	case verdict.Danger:
		return alarm.Danger
	}
	return alarm.NoSeverity
}
