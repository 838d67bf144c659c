package verdict

import (
	"fmt"
	"math"

	"lapwing/internal/duty"
)

// What is uncertain about a leak beside the scatter of blocks (reference/leaks.md section 4): the fit's own bias as a
// share of the leak, and the duty model's as a share of the path's throughput. Intervals are two of the sum wide.
const (
	leakShare = 0.03
	leakFloor = 0.002
)

func leakError(sd, leak, floor float64) float64 {
	return math.Sqrt(sd*sd + leakShare*leak*leakShare*leak + floor*floor)
}

// alike gives the share of throughput that all four valve groups of a cylinder seem to lose more than when healthy: the
// least of the four, 0 when one of them does not leak or is not known. Four valves that move alike are the gas (a wrong
// exponent, reference/leaks.md section 1) or the angle scale (another ripple of the shaft), not four leaks.
func alike(p *place, dev []*duty.Deviation) float64 {
	least := math.Inf(1)
	for e := range p.ends {
		for g := range p.ends[e].path {
			d := at(dev, p.ends[e].path[g].percent)
			if d == nil {
				return 0
			}
			least = math.Min(least, d.Residual)
		}
	}
	return math.Max(0, least)
}

// common is what has to be taken off the reading of a path.
func (b *bench) common(h int, dev []*duty.Deviation) float64 {
	if h == hRings {
		return 0
	}
	return alike(&b.place, dev)
}

// alikeError is how unlike each other such four readings may be, as a share of their least: a change of ripple reads as
// 0.66 to 1.15 % on the four groups of a machine (measured on the model, internal/leak).
const alikeError = 0.3

// sized gives a path's leak in this block, with standard deviations: m² and share of throughput, NaN where not known.
// What all four groups share is taken off a group's, not off the rings'.
func (j *Judge) sized(p pathPlace, common float64) (area, aSD, loss, lSD float64) {
	area, aSD, loss, lSD = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	floor, off := 0.0, 0.0 // of the area
	l, a := at(j.dev, p.percent), at(j.dev, p.area)
	if l != nil {
		loss = l.Residual - common
		lSD = leakError(l.Spread, loss, math.Hypot(leakFloor, alikeError*common))
	}
	if a != nil {
		// A share of throughput is as many m² as the two readings, wall heat and all, are to each other.
		if l != nil && a.Value > 0 && l.Value > 0 {
			per := a.Value / l.Value
			floor, off = math.Hypot(leakFloor, alikeError*common)*per, common*per
		}
		area = a.Residual - off
		aSD = leakError(a.Spread, area, floor)
	}
	return area, aSD, loss, lSD
}

// sizedWords is the end of a sentence on a leak: how large it is over the last blocks. Empty when no area is known.
func sizedWords(severity []Quantity) string {
	area, loss := "", ""
	for _, q := range severity {
		q.Value, q.Lo = max(0, q.Value), max(0, q.Lo) // for people only: the record keeps its sign
		switch q.Name {
		case "leak_area_mm2":
			area = fmt.Sprintf("; leak area %s mm² (%s to %s)", figure(q.Value), figure(q.Lo), figure(q.Hi))
		case "leak_percent":
			loss = fmt.Sprintf(", %.1f %% of its throughput (%.1f to %.1f)", q.Value, q.Lo, q.Hi)
		}
	}
	if area == "" {
		return ""
	}
	return area + loss
}

// figure writes a size to a tenth where that means something.
func figure(v float64) string {
	if math.Abs(v) < 10 {
		return fmt.Sprintf("%.1f", v)
	}
	return fmt.Sprintf("%.0f", v)
}

// sayLeak puts a path's leak into words: area and share of throughput, with intervals.
func (j *Judge) sayLeak(p pathPlace, common float64, subject string) string {
	area, aSD, loss, lSD := j.sized(p, common)
	s := "leak of " + subject
	if !math.IsNaN(area) {
		s = fmt.Sprintf("leak area of %s %.3g mm² (%.3g to %.3g)", subject, 1e6*area, 1e6*math.Max(0, area-2*aSD), 1e6*(area+2*aSD))
	}
	if !math.IsNaN(loss) {
		if !math.IsNaN(area) {
			s += ","
		}
		s += fmt.Sprintf(" %.3g %% of its throughput (%.3g to %.3g)", 100*loss, 100*math.Max(0, loss-2*lSD), 100*(loss+2*lSD))
	}
	return s
}
