package datum

import (
	"errors"
	"math"

	"lapwing/internal/crank"
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

// linear unknowns enter the integral as factors: their columns come with the residuals.
var linear = [...]int{uHeat, uWall, uOnce, uTwice, uArea + HS, uArea + HD, uArea + CS, uArea + CD, uArea + RG}

// touches reports whether an unknown bends a stroke. (The other end's zero does so through the rings: next to nothing.)
func touches(u int, s *stroke) bool {
	switch u {
	case uClearHE, uZeroHE, uArea + HS, uArea + HD:
		return s.end == crank.HE
	case uClearCE, uZeroCE, uArea + CS, uArea + CD:
		return s.end == crank.CE
	case uWarm:
		return s.kind == Expansion
	}
	return true
}

// residuals fills dst with what Y does that the unknowns do not explain, every stroke's mean taken out; strokes that only
// does not touch are left at zero (only < 0: all are filled). With col, the columns of the linear unknowns are filled too.
func (j *job) residuals(x *vector, dst []float64, only int, col *[unknowns][]float64) ([]float64, bool) {
	dst = dst[:0]
	for i := range j.list {
		s := &j.list[i]
		if only >= 0 && !touches(only, s) {
			dst = append(dst, make([]float64, len(s.at))...)
			continue
		}
		var ok bool
		if dst, ok = j.stroke(x, s, dst, col); !ok {
			return dst, false
		}
	}
	return dst, true
}

// unsaid is the error of ln p that the equation itself is taken to have: what noise of the pressures is weighed against.
const unsaid = 1e-3

// weight is the root of a point's weight.
func (j *job) weight(s *stroke, n int) float64 {
	if j.in.Noise == 0 {
		return 1
	}
	return 1 / math.Hypot(1, j.in.Noise/(unsaid*j.in.Duties[s.duty].P[s.end][s.at[n]]))
}

// stroke does one stroke.
func (j *job) stroke(x *vector, s *stroke, dst []float64, col *[unknowns][]float64) ([]float64, bool) {
	in, d := j.in, &j.in.Duties[s.duty]
	k := d.K + x[uK]
	cyl := in.Cylinder
	for e := range cyl.Clearance {
		cyl.Clearance[e] = x[uClearHE+e] + d.Pocket[e]
	}
	area, bore := cyl.Area(s.end), cyl.Bore
	tad := d.Ts * math.Pow(d.Pd/d.Ps, (d.K-1)/d.K)
	wall := d.Ts + x[uWall]*(tad-d.Ts)
	td := d.gasT(d.Pd)
	zero := x[uZeroHE+s.end] * j.ps
	other := d.P[1-s.end]
	heat := math.Exp(x[uHeat])
	hs, hd := uArea+HS+2*s.end, uArea+HD+2*s.end

	from := len(dst)
	var sum, rate, last vector // integrals of the linear unknowns' parts, and of all of it in [uShift]
	var mean vector
	half, count, lastV, lastLnT := 0.0, 0.0, 0.0, 0.0
	tmid := math.Sqrt(d.gasT(d.Ps) * td)
	for n, i := range s.at {
		deg := in.deg(i) + x[uShift]*180/math.Pi
		p, v, w := d.P[s.end][i]-zero, cyl.Volume(s.end, deg), d.omega(i)
		if !(p > 0) || !(v > 0) {
			return dst, false
		}
		t := d.gasT(p)
		if s.kind == Expansion {
			t *= 1 + x[uWarm]
		}
		own := deg * math.Pi / 180
		if s.end == crank.CE {
			own += math.Pi
		}
		once, twice := math.Cos(own), math.Cos(2*own)
		flux := (k - 1) * heat * j.law.wall(own, p, t, v, bore, area, w, k, d.RZ)
		shape := 1 + x[uOnce]*once + x[uTwice]*twice
		rate[uHeat] = flux * shape * (wall - t)
		rate[uWall] = flux * shape * (tad - d.Ts)
		rate[uOnce], rate[uTwice] = flux*once*(wall-t), flux*twice*(wall-t)
		all := rate[uHeat]
		if !in.NoValves {
			rate[hs] = k * j.unit[HS+2*s.end] * d.inflow(p, t, d.Ps, d.Ts, v, w)
			rate[hd] = k * j.unit[HD+2*s.end] * d.inflow(p, t, d.Pd, td, v, w)
			all += x[hs]*rate[hs] + x[hd]*rate[hd]
		}
		if j.use[uArea+RG] {
			q := in.Beyond
			if other != nil {
				q = other[i] - x[uZeroHE+1-s.end]*j.ps
			}
			if !(q > 0) {
				return dst, false
			}
			rate[uArea+RG] = k * j.unit[RG] * d.inflow(p, t, q, d.gasT(q), v, w)
			all += x[uArea+RG] * rate[uArea+RG]
		}
		rate[uShift] = all
		if d.KSlope != 0 {
			lnT := math.Log(t / tmid)
			if n > 0 {
				sum[uShift] -= d.KSlope * (lastLnT + lnT) / 2 * math.Log(v/lastV)
			}
			lastV, lastLnT = v, lnT
		}
		if n > 0 {
			sum[uShift] += (last[uShift] + all) * half
			if col != nil {
				for _, u := range linear {
					sum[u] += (last[u] + rate[u]) * half
				}
			}
		}
		last = rate
		if n+1 < len(s.at) {
			half = float64(s.at[n+1]-i) * in.Step * math.Pi / 360
		}
		y := math.Log(p) + k*math.Log(v) - sum[uShift]
		dst = append(dst, y)
		weight := j.weight(s, n)
		weight *= weight
		count += weight
		mean[uShift] += weight * y
		if col != nil {
			for _, u := range linear {
				col[u] = append(col[u], -sum[u])
				mean[u] -= weight * sum[u]
			}
		}
	}
	for n := from; n < len(dst); n++ {
		w := j.weight(s, n-from)
		dst[n] = w * (dst[n] - mean[uShift]/count)
		if col != nil {
			for _, u := range linear {
				col[u][n] = w * (col[u][n] - mean[u]/count)
			}
		}
	}
	return dst, true
}

// eachStroke is how many independent values a stroke's points are worth: what is left after the fit is not noise but
// the law of heat, and bends slowly along the stroke.
const eachStroke = 5.0

// solved is the outcome of a job.
type solved struct {
	x      vector
	rms    float64
	sigma  float64 // of one point, so that a stroke counts for eachStroke values
	a      matrix  // normal matrix over sigma², without priors
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

type matrix [unknowns][unknowns]float64

// inverse of a symmetric positive definite matrix, by Cholesky after scaling to a unit diagonal.
func (a *matrix) inverse() (inv matrix, ok bool) {
	var scale vector
	var l matrix
	for i := range a {
		if !(a[i][i] > 0) || math.IsInf(a[i][i], 0) {
			return inv, false
		}
		scale[i] = 1 / math.Sqrt(a[i][i])
	}
	for i := range a {
		for j := 0; j <= i; j++ {
			v := a[i][j] * scale[i] * scale[j]
			for k := range j {
				v -= l[i][k] * l[j][k]
			}
			if i != j {
				l[i][j] = v / l[j][j]
				continue
			}
			if !(v > 1e-12) {
				return inv, false
			}
			l[i][i] = math.Sqrt(v)
		}
	}
	for c := range a {
		var z vector
		for i := range a {
			v := 0.0
			if i == c {
				v = 1
			}
			for k := range i {
				v -= l[i][k] * z[k]
			}
			z[i] = v / l[i][i]
		}
		for i := unknowns - 1; i >= 0; i-- {
			for k := i + 1; k < unknowns; k++ {
				z[i] -= l[k][i] * z[k]
			}
			z[i] /= l[i][i]
		}
		for i := range a {
			inv[i][c] = z[i] * scale[i] * scale[c]
		}
	}
	return inv, true
}
