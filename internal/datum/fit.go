package datum

import (
	"errors"
	"math"
)

// job is one estimate in the making.
type job struct {
	in     *Input
	law    law
	ps     float64        // Pa, lowest Ps: the unit of zeros
	unit   [Paths]float64 // m², of the areas
	use    [unknowns]bool
	centre vector // of the priors
	sd     vector // of the priors
	list   []stroke
}

func newJob(in *Input, pri Priors, l law) *job {
	j := &job{in: in, law: l, ps: math.Inf(1), list: in.strokes()}
	for i := range in.Duties {
		j.ps = math.Min(j.ps, in.Duties[i].Ps)
	}
	mid := &in.Duties[len(in.Duties)/2]
	j.unit = in.areaOfPercent(mid)
	for p := range j.unit {
		j.unit[p] *= math.Sqrt(mid.RZ*mid.Ts) / likeMethane
	}
	j.centre[uClearHE], j.centre[uClearCE] = in.Cylinder.Clearance[0], in.Cylinder.Clearance[1]
	j.centre[uWall] = pri.WallAt
	rad := math.Pi / 180
	j.sd = vector{pri.DeadCentre * rad, pri.Clearance, pri.Clearance, pri.Zero, pri.Zero, pri.K, pri.Heat, pri.WallSD, pri.HeatShape, pri.HeatShape, .03}
	for _, u := range []int{uShift, uK, uHeat, uWall, uOnce, uTwice, uWarm} {
		j.use[u] = true
	}
	var seen [2]bool
	for _, s := range j.list {
		seen[s.end] = true
	}
	both := true
	for i := range in.Duties {
		both = both && in.Duties[i].P[0] != nil && in.Duties[i].P[1] != nil
	}
	for e, ok := range seen {
		j.use[uClearHE+e], j.use[uZeroHE+e] = ok, ok
		j.use[uArea+HS+2*e], j.use[uArea+HD+2*e] = ok && !in.NoValves, ok && !in.NoValves
	}
	j.use[uArea+RG] = both || in.Beyond > 0
	for p := range Paths {
		j.sd[uArea+p], j.centre[uArea+p] = pri.Leak, pri.LeakAt
	}
	j.sd[uArea+RG], j.centre[uArea+RG] = pri.Rings, pri.RingsAt
	for u := range unknowns {
		if !j.use[u] && u >= uArea {
			j.centre[u] = 0
		}
	}
	return j
}

const likeMethane = 395.0 // √(RT) of methane at 300 K, m/s

// eachStroke is how many independent values a stroke's points are worth: what is left after the fit is not noise but
// the law of heat, and bends slowly along the stroke.
const eachStroke = 5.0

// solved is the outcome of a job.
type solved struct {
	x      vector
	rms    float64
	sigma  float64 // of one point, so that a stroke counts for eachStroke values
	byDuty []matrix
	bDuty  []vector // its right side at x, by duty
	inv    matrix
	points int
}

// steps are those of the unknowns that are not linear, for the columns' finite differences.
var steps = vector{uShift: 1e-4, uClearHE: 1e-4, uClearCE: 1e-4, uZeroHE: 1e-4, uZeroCE: 1e-4, uK: 1e-4, uWarm: 1e-3}

var errRanAway = errors.New("datum: the estimate ran away")

// solve runs Gauss and Newton from the priors' centres.
func (j *job) solve() (solved, error) {
	x := j.centre
	s := solved{sigma: 2e-3}
	var r, moved []float64
	var col [unknowns][]float64
	for iter := range 12 {
		for _, u := range linear {
			col[u] = col[u][:0]
		}
		var ok bool
		if r, ok = j.residuals(&x, r, -1, &col); !ok {
			return s, errRanAway
		}
		ss := 0.0
		for _, v := range r {
			ss += v * v
		}
		s.points = len(r)
		s.rms = math.Sqrt(ss / float64(len(r)))
		if iter > 1 {
			s.sigma = math.Max(s.rms, leastRMS) * math.Sqrt(float64(len(r))/float64(len(j.list))/eachStroke)
		}
		for u, h := range steps {
			if h == 0 || !j.use[u] {
				continue
			}
			y := x
			y[u] += h
			if moved, ok = j.residuals(&y, moved, u, nil); !ok {
				return s, errRanAway
			}
			col[u] = col[u][:0]
			at := 0
			for i := range j.list {
				st := &j.list[i]
				for n := at; n < at+len(st.at); n++ {
					if touches(u, st) {
						col[u] = append(col[u], (moved[n]-r[n])/h)
					} else {
						col[u] = append(col[u], 0)
					}
				}
				at += len(st.at)
			}
		}
		s.byDuty, s.bDuty = make([]matrix, len(j.in.Duties)), make([]vector, len(j.in.Duties))
		at := 0
		for _, st := range j.list {
			m, b := &s.byDuty[st.duty], &s.bDuty[st.duty]
			for i := at; i < at+len(st.at); i++ {
				for u := range unknowns {
					if !j.use[u] {
						continue
					}
					for v := range u + 1 {
						if j.use[v] {
							m[u][v] += col[u][i] * col[v][i]
						}
					}
					b[u] -= col[u][i] * r[i]
				}
			}
			at += len(st.at)
		}
		for d := range s.byDuty {
			for u := range unknowns {
				for v := range u + 1 {
					s.byDuty[d][u][v] /= s.sigma * s.sigma
					s.byDuty[d][v][u] = s.byDuty[d][u][v]
				}
				s.bDuty[d][u] /= s.sigma * s.sigma
			}
		}
		s.x = x
		dx, inv, ok := j.step(&s, -1)
		if !ok {
			return s, errors.New("datum: the unknowns cannot be told apart on these strokes")
		}
		s.inv = inv
		most := 0.0
		for u := range x {
			lim := 1.0
			if j.use[u] {
				lim = 2 * j.sd[u]
				dx[u] = math.Max(-lim, math.Min(lim, dx[u]))
				most = math.Max(most, math.Abs(dx[u])/j.sd[u])
			}
			x[u] += dx[u]
		}
		if iter > 2 && most < 1e-3 {
			break
		}
	}
	s.x = x
	return s, nil
}

const leastRMS = 2e-5 // of ln p: less than that no block mean is worth

// step solves for the change of the unknowns with one duty left out (-1: none).
func (j *job) step(s *solved, without int) (dx vector, inv matrix, ok bool) {
	var a matrix
	var b vector
	for d := range s.byDuty {
		if d == without {
			continue
		}
		for u := range a {
			for v := range a {
				a[u][v] += s.byDuty[d][u][v]
			}
			b[u] += s.bDuty[d][u]
		}
	}
	for u := range a {
		w := 1 / (j.sd[u] * j.sd[u])
		if !j.use[u] {
			a[u] = [unknowns]float64{}
			for v := range a {
				a[v][u] = 0
			}
			a[u][u], b[u] = 1, 0
			continue
		}
		a[u][u] += w
		b[u] += w * (j.centre[u] - s.x[u])
	}
	inv, ok = a.inverse()
	if !ok {
		return dx, inv, false
	}
	for u := range dx {
		for v := range b {
			dx[u] += inv[u][v] * b[v]
		}
	}
	return dx, inv, true
}
