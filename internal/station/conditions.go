package station

import (
	"slices"
	"strings"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// findingOffDelay is how long the evidence must be gone before a finding's alarm returns.
const findingOffDelay = time.Minute

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
