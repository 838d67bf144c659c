package leak

import (
	"math"
	"testing"
)

// y = 2 a − 3 b on points where a and b are orthogonal: closed form.
func TestSolveClosedForm(t *testing.T) {
	q := normal{}
	q.use[HS], q.use[phase] = true, true
	for i := range 8 {
		var x [unknowns]float64
		x[HS] = 1e-3 * float64(1-2*(i%2))
		x[phase] = 1e4 * float64(1-2*(i/2%2))
		q.add(&x, 2*x[HS]-3*x[phase])
	}
	var none [unknowns]float64
	s, ok := q.solve(&none, &none)
	if !ok || math.Abs(s.x[HS]-2) > 1e-6 || math.Abs(s.x[phase]+3) > 1e-12 {
		t.Fatalf("%v %v", s.x, ok)
	}
	// Unit noise: variance 1/Σx².
	if v := s.variance(HS); math.Abs(v*8e-6-1) > 1e-12 {
		t.Errorf("variance %g, want %g", v, 1/8e-6)
	}
	// A prior as strong as the data draws the answer half way to its centre.
	prior, centre := none, none
	prior[HS], centre[HS] = 8e-6, 10
	if s, ok = q.solve(&prior, &centre); !ok || math.Abs(s.x[HS]-6) > 1e-6 {
		t.Errorf("with prior %g, want 6", s.x[HS])
	}
}

func TestSolveSameColumns(t *testing.T) {
	q := normal{}
	q.use[HS], q.use[RG] = true, true
	for i := range 8 {
		var x [unknowns]float64
		x[HS], x[RG] = float64(i), 7*float64(i)
		q.add(&x, float64(i))
	}
	var none [unknowns]float64
	if _, ok := q.solve(&none, &none); ok {
		t.Error("two columns of one shape must be refused")
	}
	q.use[RG], q.use[CD] = false, true // a column of nothing
	if _, ok := q.solve(&none, &none); ok {
		t.Error("a column of zeros must be refused")
	}
}

// add puts one point into the equations.
func (q *normal) add(x *[unknowns]float64, y float64) {
	col := [sUnknowns]int{HS, CD, RG, phase, zeroHE}
	var row [1][sUnknowns]float64
	for i, u := range col {
		row[0][i] = x[u]
	}
	q.addRows(col, row[:], []float64{y})
}
