package wire

import (
	"math"
	"strings"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/verdict"
)

// Why answers why a finding was raised, or why nothing was: GET /api/v1/why. Schema: why.
type Why struct {
	Version int        `json:"v"`
	Skid    string     `json:"skid"`
	Subject string     `json:"subject,omitempty"` // asked about; absent: everything
	Turn    int64      `json:"turn,omitempty"`    // asked about; absent: the newest
	Said    []string   `json:"said"`              // the answer in plain words
	Blocks  []WhyBlock `json:"blocks"`            // oldest first
	Turns   []WhyTurn  `json:"turns"`             // turn by turn, oldest first
	Points  []Point    `json:"points"`            // alarm points of the subject
	Caution string     `json:"caution"`
}

// WhyBlock is how one block of turns of one throw was judged.
type WhyBlock struct {
	Type    string    `json:"type"` // "why"
	Throw   string    `json:"throw"`
	Turns   [2]int64  `json:"turns"`   // first and last
	Samples [2]int64  `json:"samples"` // raw sample range, half open
	Step    int       `json:"load_step"`
	RPM     *float64  `json:"speed_rpm,omitempty"`
	Ps      *float64  `json:"p_suction_bar_abs,omitempty"`
	Pd      *float64  `json:"p_discharge_bar_abs,omitempty"`
	Settled bool      `json:"settled"` // every turn was steady; otherwise deviations count for less
	Ends    []WhyEnd  `json:"ends"`
	Cases   []WhyCase `json:"hypotheses"`
}

// WhyEnd says whether an end showed enough to be judged.
type WhyEnd struct {
	End    string `json:"end"`
	Judged bool   `json:"judged"`
	Shown  int    `json:"pressure_measures"`
	Wanted int    `json:"pressure_measures_wanted"`
}

// WhyCase is one hypothesis in one block.
type WhyCase struct {
	Subject   string        `json:"subject"`
	Kind      string        `json:"kind"`
	Sensor    bool          `json:"sensor,omitempty"` // about a channel, the gas or the geometry
	Grade     string        `json:"grade"`
	Judged    bool          `json:"judged"`
	Why       string        `json:"why_not_judged,omitempty"`
	Total     *float64      `json:"total_ln,omitempty"` // sum of the classes' medians: what an alert is measured by
	Classes   []WhyClass    `json:"classes,omitempty"`
	Amplitude *float64      `json:"pattern_amplitude,omitempty"` // of the pressures' whole pattern
	Spread    *float64      `json:"pattern_spread,omitempty"`
	Spreads   *float64      `json:"pattern_spreads,omitempty"`
	Evidence  []WhyEvidence `json:"evidence,omitempty"`
	Missing   []string      `json:"missing_for_next_grade,omitempty"`
	NotApart  []string      `json:"cannot_tell_from,omitempty"`
}

// WhyClass is what one class of signal says; natural log-likelihood ratios.
type WhyClass struct {
	Class  string   `json:"class"`
	Raw    *float64 `json:"raw_ln,omitempty"`    // of this block, before caps and rules
	Weight *float64 `json:"weight_ln,omitempty"` // of this block, as it counts
	Median *float64 `json:"median_ln,omitempty"` // over the last blocks: what grades
	Strong int      `json:"strong_of_last_four"`
	Why    string   `json:"why,omitempty"` // the rule that took from raw, or why the class is absent
}

// WhyEvidence is one deviation with its part in a hypothesis.
type WhyEvidence struct {
	Class    string   `json:"class"`
	Measure  string   `json:"measure"` // subject/name, the unit in the name
	Text     string   `json:"text"`
	Value    *float64 `json:"value,omitempty"`
	Expected *float64 `json:"expected,omitempty"`
	Spread   *float64 `json:"spread,omitempty"`
	Spreads  *float64 `json:"spreads,omitempty"`
	Turns    int      `json:"turns"`               // behind it
	Speaks   string   `json:"speaks_when"`         // above, below or off what is expected
	Raw      *float64 `json:"alone_ln,omitempty"`  // what it would weigh alone
	Weight   *float64 `json:"weight_ln,omitempty"` // its part of the class's weight
}

// WhyTurn is one turn of one throw: what it was compared with, or why it was not compared.
type WhyTurn struct {
	Type     string       `json:"type"` // "why-turn"
	Turn     int64        `json:"turn"`
	Throw    string       `json:"throw"`
	Valid    bool         `json:"valid"`
	Duty     string       `json:"duty,omitempty"`
	Step     int          `json:"load_step"`
	Compared bool         `json:"compared"`
	Why      string       `json:"why_not,omitempty"`
	Measures []WhyMeasure `json:"measures,omitempty"`
}

// WhyMeasure is one measure of one turn against what is normal at its duty.
type WhyMeasure struct {
	Measure  string   `json:"measure"`
	Value    *float64 `json:"value,omitempty"`
	Expected *float64 `json:"expected,omitempty"`
	Spread   *float64 `json:"spread,omitempty"`
	Spreads  *float64 `json:"spreads,omitempty"`
}

// FromExplanation puts the judge's reasons into the units people read. Of subjects that keep refuses nothing is given;
// evidence only where asked for.
func FromExplanation(x *verdict.Explanation, layout measure.Layout, keep func(subject string) bool, evidence bool) WhyBlock {
	b := WhyBlock{Type: "why", Throw: x.ID, Turns: [2]int64{x.Turn0, x.Turn1}, Samples: [2]int64{x.Seq0, x.Seq1}, Step: x.Point.Step,
		RPM: opt(round(x.Point.RPM, 1)), Ps: opt(figures(x.Point.Ps/1e5, 6)), Pd: opt(figures(x.Point.Pd/1e5, 6)), Settled: x.Settled, Ends: []WhyEnd{}, Cases: []WhyCase{}}
	for _, e := range x.Ends {
		if e.Subject != "" {
			b.Ends = append(b.Ends, WhyEnd{End: e.Subject, Judged: e.Judged, Shown: e.Features, Wanted: e.Wanted})
		}
	}
	for i := range x.Cases {
		r := &x.Cases[i]
		if keep != nil && !keep(r.Subject) {
			continue
		}
		c := WhyCase{Subject: r.Subject, Kind: r.Kind, Sensor: r.Sensor, Grade: r.Grade.String(), Judged: r.Judged, Why: r.Why, Missing: r.Missing, NotApart: r.Ambiguous}
		if r.Judged {
			c.Total = opt(round(r.Total, 2))
		}
		if r.Pattern.Known {
			c.Amplitude, c.Spread, c.Spreads = opt(figures(r.Pattern.Amplitude, 4)), opt(figures(r.Pattern.SD, 4)), opt(round(r.Pattern.Z, 2))
		}
		for _, v := range r.Classes {
			c.Classes = append(c.Classes, WhyClass{Class: v.Class.String(), Raw: opt(round(v.Raw, 2)), Weight: opt(round(v.LLR, 2)), Median: opt(round(v.Median, 2)), Strong: v.Strong, Why: v.Why})
		}
		for _, e := range r.Evidence {
			if !evidence || e.Feature < 0 || e.Feature >= len(layout) {
				continue
			}
			m := people(&layout[e.Feature], e.Value, e.Expected, e.Spread, e.Z)
			speaks := "off"
			if e.Sign > 0 {
				speaks = "above"
			} else if e.Sign < 0 {
				speaks = "below"
			}
			c.Evidence = append(c.Evidence, WhyEvidence{Class: e.Class.String(), Measure: m.Measure, Text: e.Text, Value: m.Value, Expected: m.Expected, Spread: m.Spread, Spreads: m.Spreads,
				Turns: e.N, Speaks: speaks, Raw: opt(round(e.Raw, 2)), Weight: opt(round(e.Weight, 2))})
		}
		b.Cases = append(b.Cases, c)
	}
	return b
}

// FromDeviation puts one turn's deviation into the units people read.
func FromDeviation(d *duty.Deviation, layout measure.Layout) WhyMeasure {
	return people(&layout[d.Feature], d.Value, d.Expected, d.Spread, d.Z)
}

func people(f *measure.Feature, value, expected, spread, z float64) WhyMeasure {
	return WhyMeasure{Measure: f.Subject + "/" + f.Name, Value: opt(figures(value*f.Scale+f.Shift, 9)), Expected: opt(figures(expected*f.Scale+f.Shift, 9)),
		Spread: opt(figures(spread*math.Abs(f.Scale), 4)), Spreads: opt(round(z, 2))}
}

// Within tells whether a subject is another one or a part of it: t1.he.suction is within t1.he, not within t1.he.s.
func Within(subject, whole string) bool {
	return whole == "" || subject == whole || strings.HasPrefix(subject, whole+".")
}
