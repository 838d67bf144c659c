package wire

import (
	"encoding/json"
	"fmt"
	"time"

	"lapwing/internal/alarm"
)

// Caution stands in every message on which somebody might act.
const Caution = "Monitoring only, not a protection system. Before touching a valve or transducer: isolate, depressurise and lock out; follow site permits, local codes and licensed practice."

// Alarm is one alarm transition as it goes over the wire. (skid, id) is unique for ever: drop a repeat by it.
type Alarm struct {
	Version  int       `json:"v"`
	Skid     string    `json:"skid"`
	ID       uint64    `json:"id"`
	At       time.Time `json:"at"` // UTC
	Turn     int64     `json:"turn"`
	Key      string    `json:"key"`
	Subject  string    `json:"subject"`
	Kind     string    `json:"kind"`
	From     string    `json:"from"`
	To       string    `json:"to"`
	Severity string    `json:"severity"`
	Was      string    `json:"was"`
	Sentence string    `json:"sentence"`
	By       string    `json:"by,omitempty"`
	Note     string    `json:"note,omitempty"`
	Detail   any       `json:"detail,omitempty"`
	Clip     string    `json:"clip,omitempty"` // raw samples protected for this alarm
	Test     bool      `json:"test,omitempty"`
	Caution  string    `json:"caution"`
}

// FromTransition encodes a transition; clip names the protected raw samples, "" when there are none.
func FromTransition(skid string, t *alarm.Transition, clip string) ([]byte, error) {
	b, err := json.Marshal(Alarm{
		Version: 1, Skid: skid, ID: t.ID, At: t.At.UTC(), Turn: t.Turn, Key: t.Key, Subject: t.Subject, Kind: t.Kind,
		From: t.From.String(), To: t.To.String(), Severity: t.Severity.String(), Was: t.Was.String(),
		Sentence: t.Sentence, By: t.By, Note: t.Note, Detail: t.Detail, Clip: clip, Caution: Caution,
	})
	if err != nil {
		return nil, fmt.Errorf("wire: alarm %d: %w", t.ID, err)
	}
	return b, nil
}
