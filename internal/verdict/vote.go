package verdict

import "math"

// vote is what one class of signal says about one hypothesis in one block: a log-likelihood ratio, what it was before
// caps and rules, and the rule that took from it. NaN: absent.
type vote struct {
	llr, raw float64
	why      string
}

var silent = vote{llr: math.NaN(), raw: math.NaN()}

// votes is a vote by z within the caps of a class.
func votes(z float64) vote {
	raw := llr(z)
	return vote{llr: capped(raw), raw: raw}
}

// most holds a vote down, and says why when that took something.
func (v *vote) most(limit float64, why string) {
	if v.llr > limit {
		v.llr, v.why = limit, why
	}
}

// least holds a vote up: what is cold or still may be so for many reasons.
func (v *vote) least(limit float64) { v.llr = math.Max(limit, v.llr) }
