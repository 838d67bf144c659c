package leak

import (
	"math"

	"lapwing/internal/crank"
)

// shape holds what the fit needs of an end's volumes on the grid; it changes only when the cylinder or the grid does.
type shape struct {
	lnV, slope []float64 // slope is V′/V per radian
}

// shapes keeps the shapes of the cylinder fitted last.
type shapes struct {
	cyl      crank.Cylinder
	lo, step float64
	n        int
	end      [2]shape
}

// sample reads one end's shape at every grid point, or between them when the grid is shifted.
type sample struct {
	in            *Input
	end           int
	shift         float64
	v, lnV, slope []float64
	by            int        // whole steps of the shift
	w             [4]float64 // weights of the points by−1 … by+2; used when shifted
}

// of gives the shape of an end with the grid shifted by so many degrees. Between grid points it is the cubic through
// the four nearest ones: on a 1° grid that is good to 1e-8 of V, far below any noise of a pressure.
func (s *shapes) of(in *Input, end int, shift float64) sample {
	n := len(in.V[end])
	if s.cyl != in.Cylinder || s.lo != in.Lo || s.step != in.Step || s.n != n {
		*s = shapes{cyl: in.Cylinder, lo: in.Lo, step: in.Step, n: n, end: s.end}
		for e := range s.end {
			s.end[e].lnV, s.end[e].slope = s.end[e].lnV[:0], s.end[e].slope[:0]
		}
	}
	t := &s.end[end]
	if len(t.lnV) == 0 {
		for i, v := range in.V[end] {
			t.lnV = append(t.lnV, math.Log(v))
			t.slope = append(t.slope, in.Cylinder.DVolume(end, in.deg(i))/v)
		}
	}
	out := sample{in: in, end: end, shift: shift, v: in.V[end], lnV: t.lnV, slope: t.slope}
	if shift != 0 {
		x := shift / in.Step
		whole := math.Floor(x)
		x -= whole
		out.by = int(whole)
		out.w = [4]float64{-x * (x - 1) * (x - 2) / 6, (x + 1) * (x - 1) * (x - 2) / 2, -(x + 1) * x * (x - 2) / 2, (x + 1) * x * (x - 1) / 6}
	}
	return out
}

// at gives V, ln V and V′/V at point i.
func (s *sample) at(i int) (v, lnV, slope float64) {
	if s.shift == 0 {
		return s.v[i], s.lnV[i], s.slope[i]
	}
	if k := i + s.by - 1; k >= 0 && k+4 <= len(s.v) {
		return s.mix(s.v[k:]), s.mix(s.lnV[k:]), s.mix(s.slope[k:])
	}
	deg := s.in.deg(i) + s.shift
	v = s.in.Cylinder.Volume(s.end, deg)
	return v, math.Log(v), s.in.Cylinder.DVolume(s.end, deg) / v
}

func (s *sample) mix(x []float64) float64 {
	return s.w[0]*x[0] + s.w[1]*x[1] + s.w[2]*x[2] + s.w[3]*x[3]
}
