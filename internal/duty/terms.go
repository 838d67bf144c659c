package duty

import (
	"math"
	"slices"
)

// The regressors, in their order: 1, a, b, c, a², b², a·b with a = ln(Pd/Ps), b = rpm, c = ln Ps, each centred and
// scaled on what the learning run showed.
const (
	numVars  = 3
	numTerms = 7
)

// How a term is made of the scaled variables.
func fill(x *[numTerms]float64, u [numVars]float64, on [numTerms]bool) {
	*x = [numTerms]float64{1, u[0], u[1], u[2], u[0] * u[0], u[1] * u[1], u[0] * u[1]}
	for i := range x {
		if !on[i] {
			x[i] = 0
		}
	}
}

// vars gives a point's raw variables.
func vars(rpm, ps, pd float64) [numVars]float64 {
	return [numVars]float64{math.Log(pd / ps), rpm, math.Log(ps)}
}

// Shape is which terms a learning run can bear, and how its variables are scaled.
type Shape struct {
	Centre [numVars]float64 `json:"centre"`
	Scale  [numVars]float64 `json:"scale"`
	Lo     [numVars]float64 `json:"lo"` // what it has seen, margins included
	Hi     [numVars]float64 `json:"hi"`
	On     [numTerms]bool   `json:"on"`
}

// Least spans, as 2-98 % ranges: below line a slope cannot be told from noise, below curve a curvature cannot.
// Margins say how far outside the seen range the fit is still used: more where a slope is known.
var spans = [numVars]struct{ line, curve, margin, blind float64 }{
	{0.04, 0.20, 0.02, 0.010}, // ln ratio
	{0.02, 0.10, 0.01, 0.010}, // rpm, as a share of the centre
	{0.02, 9, 0.02, 0.020},    // ln Ps
}

// shapeOf looks at the duties of a run. Few turns bear few terms.
func shapeOf(rows [][numVars]float64) Shape {
	var s Shape
	s.On[0] = true
	n := len(rows)
	col := make([]float64, n)
	var wide [numVars]bool
	for v := range numVars {
		for i := range rows {
			col[i] = rows[i][v]
		}
		slices.Sort(col)
		lo, mid, hi := quantile(col, 0.02), quantile(col, 0.5), quantile(col, 0.98)
		unit := 1.0
		if v == 1 {
			unit = math.Max(math.Abs(mid), 1e-9)
		}
		span := (hi - lo) / unit
		margin := spans[v].blind
		if span >= spans[v].line && n >= 60 {
			s.On[1+v] = true
			margin = spans[v].margin
		}
		wide[v] = span >= spans[v].curve && n >= 200 && levels(col, lo, hi) >= 4
		s.Centre[v], s.Scale[v] = mid, math.Max((hi-lo)/2, spans[v].line*unit/2)
		s.Lo[v], s.Hi[v] = lo-margin*unit, hi+margin*unit
	}
	s.On[4] = wide[0]
	s.On[5] = wide[1]
	s.On[6] = wide[0] && wide[1]
	return s
}

// levels counts how many eighths of the range are visited: two duties make a line, not a curve.
func levels(sorted []float64, lo, hi float64) int {
	if !(hi > lo) {
		return 1
	}
	var hit [8]int
	for _, v := range sorted {
		k := int(8 * (v - lo) / (hi - lo))
		hit[min(max(k, 0), 7)]++
	}
	n := 0
	for _, h := range hit {
		if h >= max(3, len(sorted)/100) {
			n++
		}
	}
	return n
}

// row gives a duty's regressors.
func (s *Shape) row(v [numVars]float64) (x [numTerms]float64) {
	var u [numVars]float64
	for i := range u {
		u[i] = (v[i] - s.Centre[i]) / s.Scale[i]
	}
	fill(&x, u, s.On)
	return x
}

// inside tells whether a duty lies in the seen range; when not, which variable is outside.
func (s *Shape) inside(v [numVars]float64) (int, bool) {
	for i := range v {
		if !(v[i] >= s.Lo[i] && v[i] <= s.Hi[i]) {
			return i, false
		}
	}
	return 0, true
}

func quantile(sorted []float64, q float64) float64 {
	if len(sorted) == 0 {
		return math.NaN()
	}
	x := q * float64(len(sorted)-1)
	i := int(x)
	if i+1 >= len(sorted) {
		return sorted[len(sorted)-1]
	}
	return sorted[i] + (x-float64(i))*(sorted[i+1]-sorted[i])
}
