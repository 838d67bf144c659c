package verdict

import (
	"fmt"
	"math"
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

// sized gives a path's leak in this block, with standard deviations: m² and share of throughput, NaN where not known.
func (j *Judge) sized(p pathPlace) (area, aSD, loss, lSD float64) {
	area, aSD, loss, lSD = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	floor := 0.0 // of the area
	l, a := at(j.dev, p.percent), at(j.dev, p.area)
	if l != nil {
		loss, lSD = l.Residual, leakError(l.Spread, l.Residual, leakFloor)
	}
	if a != nil {
		// A share of throughput is as many m² as the two readings, wall heat and all, are to each other.
		if l != nil && a.Value > 0 && l.Value > 0 {
			floor = leakFloor * a.Value / l.Value
		}
		area, aSD = a.Residual, leakError(a.Spread, a.Residual, floor)
	}
	return area, aSD, loss, lSD
}

// sayLeak puts a path's leak into words: area and share of throughput, with intervals.
func (j *Judge) sayLeak(p pathPlace, subject string) string {
	area, aSD, loss, lSD := j.sized(p)
	s := "leak of " + subject
	with := func(v, sd float64, unit string) string {
		return fmt.Sprintf(" %.3g %s (%.3g to %.3g)", v, unit, math.Max(0, v-2*sd), v+2*sd)
	}
	if !math.IsNaN(area) {
		s = "leak area of " + subject + with(1e6*area, 1e6*aSD, "mm²")
	}
	if !math.IsNaN(loss) {
		if !math.IsNaN(area) {
			s += ","
		}
		s += with(100*loss, 100*lSD, "% of its throughput")
	}
	return s
}
