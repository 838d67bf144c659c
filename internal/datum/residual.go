package datum

import (
	"math"

	"lapwing/internal/crank"
)

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
