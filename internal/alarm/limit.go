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
	High, Low float64
	Deadband  float64 // how far back inside the value must come before the condition is gone, >= 0
	Severity  Severity
}

// LimitDetail travels with the transition: the numbers behind it.
type LimitDetail struct {
	Value    float64 `json:"value"`
	Limit    float64 `json:"limit"`
	Deadband float64 `json:"deadband"`
}

// HighKey and LowKey name the limit's two points.
func (l Limit) HighKey() string { return l.Subject + "/" + l.Measure + "/high" }

// LowKey names the point of the lower bound.
func (l Limit) LowKey() string { return l.Subject + "/" + l.Measure + "/low" }

// Conditions appends to dst one condition per bound that is set (NaN: not set). A NaN value cannot be judged.
//
// The deadband's memory is the alarm itself: standing tells whether a point is active now (Annunciator.Standing), so
// that a restart inside the deadband changes nothing. Until the point is raised the bound alone counts.
func (l Limit) Conditions(dst []Condition, value float64, standing func(key string) bool, turn, seq0, seq1 int64) []Condition {
	one := func(key, kind, word string, bound, beyond float64) {
		c := Condition{Key: key, Subject: l.Subject, Kind: kind, Known: !math.IsNaN(value), Turn: turn, Seq0: seq0, Seq1: seq1}
		if c.Known {
			back := 0.0
			if standing != nil && standing(key) {
				back = l.Deadband
			}
			if beyond > -back || (beyond == 0 && back == 0) {
				c.Severity = l.Severity
			}
			c.Sentence = fmt.Sprintf("%s: %s is %s, %s its limit of %s", l.Subject, l.Measure, short(value), word, short(bound))
			c.Detail = LimitDetail{Value: value, Limit: bound, Deadband: l.Deadband}
		}
		dst = append(dst, c)
	}
	if !math.IsNaN(l.High) {
		one(l.HighKey(), l.Measure+"-high", side(value >= l.High, "at or above", "below"), l.High, value-l.High)
	}
	if !math.IsNaN(l.Low) {
		one(l.LowKey(), l.Measure+"-low", side(value <= l.Low, "at or below", "above"), l.Low, l.Low-value)
	}
	return dst
}

func side(yes bool, a, b string) string {
	if yes {
		return a
	}
	return b
}

func short(v float64) string { return strconv.FormatFloat(v, 'g', 4, 64) }
