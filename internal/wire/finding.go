package wire

import (
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
	Weight   *float64 `json:"weight,omitempty"`  // log-likelihood ratio, natural log
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
	Odds      *float64 `json:"odds_ln,omitempty"`
	SinceTurn int64    `json:"since_turn"`
	Turn      int64    `json:"turn"`
	Amounts   []Amount `json:"amounts,omitempty"`
	Evidence  []Reason `json:"evidence"`
	NotApart  []string `json:"cannot_tell_from,omitempty"`
	Settle    []string `json:"to_settle_it,omitempty"`
	Next      []string `json:"usual_next_steps,omitempty"`
	Sentence  string   `json:"sentence"`
}

// FromFinding puts a finding into the units people read.
func FromFinding(f *verdict.Finding, layout measure.Layout) Finding {
	w := Finding{
		Subject: f.Subject, Kind: f.Kind, Valve: f.Valve, Grade: f.Grade.String(), Odds: opt(round(f.Odds, 2)),
		SinceTurn: f.SinceTurn, Turn: f.Turn, NotApart: f.Ambiguous, Settle: f.Settle, Next: f.Next, Sentence: f.Sentence,
		Evidence: []Reason{},
	}
	for _, q := range f.Severity {
		if x := opt(figures(q.Value, 6)); x != nil {
			w.Amounts = append(w.Amounts, Amount{Name: q.Name, Value: *x, Low: opt(figures(q.Lo, 6)), High: opt(figures(q.Hi, 6))})
		}
	}
	for _, e := range f.Evidence {
		r := Reason{Class: e.Class.String(), Text: e.Text, Weight: opt(round(e.LLR, 2)), Spreads: opt(round(e.Z, 2))}
		if e.Feature >= 0 && e.Feature < len(layout) {
			d := &layout[e.Feature]
			r.Feature = d.Subject + "/" + d.Name
			r.Value, r.Expected = opt(figures(e.Value*d.Scale+d.Shift, 9)), opt(figures(e.Expected*d.Scale+d.Shift, 9))
		}
		w.Evidence = append(w.Evidence, r)
	}
	return w
}
