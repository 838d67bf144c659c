package verdict

import (
	"math"
	"slices"
)

// Way is where a finding's size is going.
type Way string

// The ways. Unknown is for the first blocks.
const (
	Unknown Way = "unknown"
	Rising  Way = "rising"
	Steady  Way = "steady"
	Falling Way = "falling"
)

// Trend tells where the size of a finding is going: the newest half of what is remembered since it was raised, by the
// median of all slopes (H. Theil 1950, P. K. Sen 1968).
type Trend struct {
	Way      Way
	Quantity string  // of Severity that the trend is of, unit in the name; empty: the finding has no size
	PerHour  float64 // in that unit; this and what follows is 0 when the way is unknown
	Lo, Hi   float64 // interval of PerHour
	From, To float64 // the line's ends, in that unit
	Hours    float64 // that it goes over
}

// point is a finding's size at a time, the mean of n blocks.
type point struct{ t, v, n float64 }

// course is a finding's sizes since it was raised, thinned as it grows older.
type course []point

const (
	coursePoints = 48 // kept; full, neighbours are merged in pairs
	trendLeast   = 8  // points that a trend takes
)

// add takes a size at a time in seconds. A clock that goes back begins anew.
func (c course) add(t, v float64) course {
	if math.IsNaN(v) || math.IsInf(v, 0) || math.IsNaN(t) {
		return c
	}
	if n := len(c); n > 0 && t <= c[n-1].t {
		c = c[:0]
	}
	if n := len(c); n > 1 && c[n-1].n < c[0].n { // as many blocks to a point as the first has
		c[n-1] = merged(c[n-1], point{t, v, 1})
		return c
	}
	c = append(c, point{t, v, 1})
	if len(c) < coursePoints {
		return c
	}
	for k := 0; k+1 < len(c); k += 2 {
		c[k/2] = merged(c[k], c[k+1])
	}
	return c[:len(c)/2]
}

func merged(a, b point) point {
	n := a.n + b.n
	return point{(a.t*a.n + b.t*b.n) / n, (a.v*a.n + b.v*b.n) / n, n}
}

// trend judges the newest half of the course. least is the change that is worth telling.
func (c course) trend(quantity string, least float64) Trend {
	out := Trend{Way: Unknown, Quantity: quantity}
	p := c
	if len(p) > 2*trendLeast {
		p = p[len(p)/2:]
	}
	n := len(p)
	if n < trendLeast {
		return out
	}
	var slopes []float64
	for i := range p {
		for k := i + 1; k < n; k++ {
			slopes = append(slopes, (p[k].v-p[i].v)/(p[k].t-p[i].t))
		}
	}
	slices.Sort(slopes)
	m := len(slopes)
	slope := medianOf(slopes)
	// The interval by Kendall's statistic, its spread doubled: neighbouring blocks share the error of their duty.
	half := 2 * 2 * math.Sqrt(float64(n*(n-1)*(2*n+5))/18)
	lo := slopes[max(0, int(math.Floor((float64(m)-half)/2)))]
	hi := slopes[min(m-1, int(math.Ceil((float64(m)+half)/2)))]
	var level []float64
	for _, q := range p {
		level = append(level, q.v-slope*(q.t-p[0].t))
	}
	span := p[n-1].t - p[0].t
	out.Hours = span / 3600
	out.PerHour, out.Lo, out.Hi = 3600*slope, 3600*lo, 3600*hi
	out.From = medianOf(level)
	out.To = out.From + slope*span
	switch {
	case lo > 0 && slope*span >= least:
		out.Way = Rising
	case hi < 0 && -slope*span >= least:
		out.Way = Falling
	default:
		out.Way = Steady
	}
	return out
}

// told is the quantity that a kind's trend goes by, in the order of preference, and the least change worth telling.
var told = map[string][]struct {
	name  string
	least float64
}{
	Leaking:       {{"leak_area_mm2", 0.5}, {"lost_capacity_percent", 0.3}},
	ImpactingHard: {{"impact_ratio", 0.15}},
	OpeningLate:   {{"late_ms", 0.1}},
	Fluttering:    {{"extra_hits_45", 10}},
	DeadCentre:    {{"early_deg", 0.1}},
	PressureZero:  {{"zero_percent_of_suction", 0.3}},
	Clearance:     {{"clearance_points_lower", 0.1}},
	GasChanged:    {{"exponent_change", 0.002}},
	AccelGain:     {{"gain_ratio", 0.1}},
}

// follow books the block's size and judges where it is going.
func (c *trial) follow(t float64, severity []Quantity) Trend {
	for _, q := range told[c.kind] {
		for _, s := range severity {
			if s.Name == q.name {
				if c.along != q.name {
					c.along, c.course = q.name, c.course[:0]
				}
				c.course = c.course.add(t, s.Value)
				return c.course.trend(q.name, q.least)
			}
		}
	}
	return Trend{Way: Unknown}
}
