package alarm

import (
	"fmt"
	"math"
	"strconv"
)

// Limit is an absolute limit on one measure, in the unit that the measure's name states. It needs no baseline.
type Limit struct {
	Subject   string // t1, t1.he
	Measure   string // rod_load_max_kn
	What      string // the measure in words; empty: its name
	Unit      string // kN, for people
	High, Low float64
	Deadband  float64 // how far back inside the value must come before the condition is gone, >= 0
	Severity  Severity
	Next      []string // what people usually do next
}

// LimitDetail travels with the transition: the numbers behind it.
type LimitDetail struct {
	Value    float64  `json:"value"`
	Limit    float64  `json:"limit"`
	Deadband float64  `json:"deadband"`
	Next     []string `json:"usual_next_steps,omitempty"`
}

// HighKey and LowKey name the limit's two points.
func (l Limit) HighKey() string { return l.Subject + "/" + l.Measure + "/high" }

// LowKey names the point of the lower bound.
func (l Limit) LowKey() string { return l.Subject + "/" + l.Measure + "/low" }

// Ladder is all limits on one measure of one subject, e.g. an alert and a danger. They share their points: the worst
// that is exceeded is the severity.
type Ladder []Limit

// Conditions appends to dst one condition per point that has a bound (NaN: not set). A NaN value cannot be judged. A
// reason in byDesign suppresses them.
//
// The deadband's memory is the alarm itself: level tells how severe a point stands now (Annunciator.Level), so that a
// restart inside the deadband changes nothing. Until the point is raised the bound alone counts.
func (l Ladder) Conditions(dst []Condition, value float64, level func(key string) Severity, byDesign string, turn, seq0, seq1 int64) []Condition {
	if len(l) == 0 {
		return dst
	}
	dst = l.point(dst, l[0].HighKey(), "high", 1, func(l *Limit) float64 { return l.High }, value, level, byDesign, turn, seq0, seq1)
	return l.point(dst, l[0].LowKey(), "low", -1, func(l *Limit) float64 { return l.Low }, value, level, byDesign, turn, seq0, seq1)
}

// point judges the bounds of one side; sign is 1 where above is beyond.
func (l Ladder) point(dst []Condition, key, side string, sign float64, bound func(*Limit) float64, value float64, level func(key string) Severity,
	byDesign string, turn, seq0, seq1 int64) []Condition {
	c := Condition{Key: key, Subject: l[0].Subject, Kind: l[0].Measure + "-" + side, Known: !math.IsNaN(value), ByDesign: byDesign, Turn: turn, Seq0: seq0, Seq1: seq1}
	stands := NoSeverity
	if level != nil {
		stands = level(key)
	}
	var told *Limit // the worst that is exceeded, else the mildest
	for i := range l {
		b := bound(&l[i])
		if math.IsNaN(b) {
			continue
		}
		back := 0.0
		if stands >= l[i].Severity {
			back = l[i].Deadband
		}
		beyond := sign * (value - b)
		on := beyond > -back || beyond == 0 && back == 0
		switch {
		case on && l[i].Severity > c.Severity:
			c.Severity, told = l[i].Severity, &l[i]
		case told == nil, c.Severity == NoSeverity && l[i].Severity < told.Severity:
			told = &l[i]
		}
	}
	if told == nil {
		return dst // no bound on this side
	}
	if !c.Known {
		c.Severity = NoSeverity
		return append(dst, c)
	}
	b := bound(told)
	word := "inside its limit of"
	switch beyond := sign * (value - b); {
	case beyond >= 0 && sign > 0:
		word = "at or above its limit of"
	case beyond >= 0:
		word = "at or below its limit of"
	case c.Severity > NoSeverity:
		word = "back by less than the deadband from its limit of"
	}
	what := told.What
	if what == "" {
		what = told.Measure
	}
	c.Sentence = fmt.Sprintf("%s: %s: %s, %s %s", l[0].Subject, what, quantity(value, told.Unit), word, quantity(b, told.Unit))
	c.Detail = LimitDetail{Value: value, Limit: b, Deadband: told.Deadband, Next: told.Next}
	return append(dst, c)
}

func quantity(v float64, unit string) string {
	s := strconv.FormatFloat(v, 'g', 4, 64)
	switch unit {
	case "":
		return s
	case "°":
		return s + unit
	}
	return s + " " + unit
}
