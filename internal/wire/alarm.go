package wire

import (
	"time"

	"lapwing/internal/alarm"
)

// Caution stands in every message on which somebody might act.
const Caution = "Monitoring only, not a protection system. Before touching a valve or transducer: isolate, depressurise and lock out; follow site permits, local codes and licensed practice."

// Alarm is one alarm transition as it goes over the wire. (skid, journal, id) is unique for ever and ids
// rise by one: drop a repeat by it. Schemas: alarm, and standing for what a point shows now.
type Alarm struct {
	Version  int       `json:"v"`
	Skid     string    `json:"skid"`
	ID       uint64    `json:"id,omitempty"`      // from 1; absent in a standing alarm whose transition is no longer at hand
	Journal  string    `json:"journal,omitempty"` // names the journal that counts the ids: another one begins again at 1
	At       time.Time `json:"at,omitzero"`       // UTC
	Turn     int64     `json:"turn"`
	Key      string    `json:"key"`
	Subject  string    `json:"subject"`
	Kind     string    `json:"kind"`
	From     string    `json:"from,omitempty"`
	To       string    `json:"to"`
	Severity string    `json:"severity"`
	Was      string    `json:"was,omitempty"`
	Sentence string    `json:"sentence"`
	By       string    `json:"by,omitempty"`
	Note     string    `json:"note,omitempty"`
	Detail   any       `json:"detail,omitempty"`
	Clip     string    `json:"clip,omitempty"`           // raw samples protected for this alarm
	Order    int       `json:"first_up_order,omitempty"` // 1: the first since nothing stood
	Flood    bool      `json:"flood,omitempty"`          // more alarms come in than a person can follow
	Test     bool      `json:"test,omitempty"`
	Renewed  time.Time `json:"evidence_at,omitzero"` // standing alarms only: when sentence and detail were last renewed
	Open     bool      `json:"-"`                    // asks something of a person: what standing topics and the page show
	Caution  string    `json:"caution"`
}

// FromTransition puts a transition into its outside form; clip names the protected raw samples, "" when there are none.
func FromTransition(skid string, t *alarm.Transition, clip string) Alarm {
	return Alarm{
		Version: 1, Skid: skid, ID: t.ID, At: t.At.UTC(), Turn: t.Turn, Key: t.Key, Subject: t.Subject, Kind: t.Kind,
		From: t.From.String(), To: t.To.String(), Severity: t.Severity.String(), Was: t.Was.String(),
		Sentence: t.Sentence, By: t.By, Note: t.Note, Detail: t.Detail, Clip: clip, Order: t.Order, Flood: t.Flood,
		Open: t.To.Open(), Caution: Caution,
	}
}

// FromPoint is what stands at a point whose last transition is not at hand: it has no id and no state before.
func FromPoint(skid string, p *alarm.Point) Alarm {
	a := Alarm{
		Version: 1, Skid: skid, At: p.Since.UTC(), Turn: p.Turn, Key: p.Key, Subject: p.Subject, Kind: p.Kind,
		To: p.State.String(), Severity: p.Severity.String(),
		Sentence: p.Sentence, Note: p.Note, Order: p.Order, Open: p.State.Open(), Caution: Caution,
	}
	if len(p.Detail) > 0 {
		a.Detail = p.Detail
	}
	return a
}
