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

// Trend is where a finding's size is going, in the unit of the amount that it is of (and per hour). It is absent while that is not known.
type Trend struct {
	Way     string   `json:"way"` // rising, steady, falling
	Of      string   `json:"of"`  // the amount's name
	PerHour *float64 `json:"per_hour,omitempty"`
	Low     *float64 `json:"per_hour_low,omitempty"`
	High    *float64 `json:"per_hour_high,omitempty"`
	From    *float64 `json:"from,omitempty"`
	To      *float64 `json:"to,omitempty"`
	Over    *float64 `json:"over_s,omitempty"` // that it goes over
}

func fromTrend(t verdict.Trend) *Trend {
	if t.Way == "" || t.Way == verdict.Unknown || t.Quantity == "" {
		return nil
	}
	six := func(x float64) *float64 { return opt(figures(x, 6)) }
	return &Trend{Way: string(t.Way), Of: t.Quantity, PerHour: six(t.PerHour), Low: six(t.Lo), High: six(t.Hi), From: six(t.From), To: six(t.To), Over: six(3600 * t.Hours)}
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
	Trend     *Trend   `json:"trend,omitempty"`
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
		Trend: fromTrend(f.Trend), Evidence: []Reason{},
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
