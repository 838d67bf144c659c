package uplink

import (
	"encoding/json"
	"fmt"
	"math"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/measure"
	"lapwing/internal/verdict"
)

// Caution stands in every message on which somebody might act.
const Caution = "Monitoring only, not a protection system. Before touching a valve or transducer: isolate, depressurise and lock out; follow site permits, local codes and licensed practice."

// Reason is one piece of evidence as it goes over the wire, in the units people read.
type Reason struct {
	Class    string   `json:"class"` // pressure, vibration, temperature, process
	Text     string   `json:"text"`
	Feature  string   `json:"feature,omitempty"` // <subject>/<name>
	Value    *float64 `json:"value,omitempty"`
	Expected *float64 `json:"expected,omitempty"`
	Spreads  *float64 `json:"spreads,omitempty"` // deviation in robust spreads
	Weight   float64  `json:"weight"`            // log-likelihood ratio, natural log
}

// Amount is a severity with its interval; the unit is in the name.
type Amount struct {
	Name  string   `json:"name"`
	Value float64  `json:"value"`
	Low   *float64 `json:"low,omitempty"`
	High  *float64 `json:"high,omitempty"`
}

// Finding is a verdict.Finding as it goes over the wire and into the journal.
type Finding struct {
	Subject   string   `json:"subject"`
	Kind      string   `json:"kind"`
	Valve     string   `json:"valve,omitempty"`
	Grade     string   `json:"grade"`
	Odds      float64  `json:"odds_ln"`
	SinceTurn int64    `json:"since_turn"`
	Turn      int64    `json:"turn"`
	Amounts   []Amount `json:"amounts,omitempty"`
	Evidence  []Reason `json:"evidence"`
	NotApart  []string `json:"cannot_tell_from,omitempty"`
	Settle    []string `json:"to_settle_it,omitempty"`
	Next      []string `json:"usual_next_steps,omitempty"`
	Sentence  string   `json:"sentence"`
}

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

// opt leaves a number that cannot be known out of a payload: absent, never zero, never NaN on the wire.
func opt(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// FindingWire puts a finding into the units people read.
func FindingWire(f *verdict.Finding, layout measure.Layout) Finding {
	w := Finding{
		Subject: f.Subject, Kind: f.Kind, Valve: f.Valve, Grade: f.Grade.String(), Odds: round(f.Odds, 2),
		SinceTurn: f.SinceTurn, Turn: f.Turn, NotApart: f.Ambiguous, Settle: f.Settle, Next: f.Next, Sentence: f.Sentence,
	}
	for _, q := range f.Severity {
		if math.IsNaN(q.Value) {
			continue
		}
		w.Amounts = append(w.Amounts, Amount{Name: q.Name, Value: round(q.Value, 3), Low: opt(round(q.Lo, 3)), High: opt(round(q.Hi, 3))})
	}
	for _, e := range f.Evidence {
		r := Reason{Class: e.Class.String(), Text: e.Text, Weight: round(e.LLR, 2), Spreads: opt(round(e.Z, 2))}
		if e.Feature >= 0 && e.Feature < len(layout) {
			d := &layout[e.Feature]
			r.Feature = d.Subject + "/" + d.Name
			r.Value, r.Expected = opt(e.Value*d.Scale+d.Shift), opt(e.Expected*d.Scale+d.Shift)
		}
		w.Evidence = append(w.Evidence, r)
	}
	return w
}

func round(x float64, digits int) float64 {
	s := math.Pow(10, float64(digits))
	return math.Round(x*s) / s
}

// AlarmPayload encodes a transition.
func AlarmPayload(skid string, t *alarm.Transition, clip string) ([]byte, error) {
	b, err := json.Marshal(Alarm{
		Version: 1, Skid: skid, ID: t.ID, At: t.At.UTC(), Turn: t.Turn, Key: t.Key, Subject: t.Subject, Kind: t.Kind,
		From: t.From.String(), To: t.To.String(), Severity: t.Severity.String(), Was: t.Was.String(),
		Sentence: t.Sentence, By: t.By, Note: t.Note, Detail: t.Detail, Clip: clip, Caution: Caution,
	})
	if err != nil {
		return nil, fmt.Errorf("uplink: alarm %d: %w", t.ID, err)
	}
	return b, nil
}

// Features is one throw's condensed features: the latest turn's values, absent ones left out with their reason counted.
type Features struct {
	Version int                           `json:"v"`
	Skid    string                        `json:"skid"`
	Throw   string                        `json:"throw"`
	At      time.Time                     `json:"at"`
	Turn    int64                         `json:"turn"`
	RPM     float64                       `json:"speed_rpm"`
	Duty    string                        `json:"duty"`
	Values  map[string]map[string]float64 `json:"values"` // subject → name → value
	Absent  int                           `json:"absent"` // features that could not be known this turn
}

// FeaturesPayload encodes one throw's part of a vector.
func FeaturesPayload(skid, throw string, index int, layout measure.Layout, v *measure.Vector, at time.Time, duty string) ([]byte, error) {
	f := Features{Version: 1, Skid: skid, Throw: throw, At: at.UTC(), Turn: v.Turn, RPM: round(v.RPM, 2), Duty: duty, Values: map[string]map[string]float64{}}
	for i := range layout {
		d := &layout[i]
		if d.Throw != index {
			continue
		}
		x := opt(v.V[i]*d.Scale + d.Shift)
		if x == nil {
			f.Absent++
			continue
		}
		m := f.Values[d.Subject]
		if m == nil {
			m = map[string]float64{}
			f.Values[d.Subject] = m
		}
		m[d.Name] = round(*x, 5)
	}
	b, err := json.Marshal(f)
	if err != nil {
		return nil, fmt.Errorf("uplink: features of %s: %w", throw, err)
	}
	return b, nil
}
