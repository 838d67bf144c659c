package wire

import (
	"math"

	"lapwing/internal/measure"
	"lapwing/internal/verdict"
)

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

// opt leaves a number that cannot be known out of a payload: absent, never zero, never NaN on the wire.
func opt(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

func round(x float64, digits int) float64 {
	s := math.Pow(10, float64(digits))
	return math.Round(x*s) / s
}

// FromFinding puts a finding into the units people read.
func FromFinding(f *verdict.Finding, layout measure.Layout) Finding {
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
