package measure

import (
	"math"

	"lapwing/internal/window"
)

// Steps in degrees of sums over a whole turn, whose parts bend little, and along a closed line.
const (
	roomStep = 4.0
	lineStep = 1.0
)

// climate is what the flows of an end are reckoned with.
type climate struct {
	ps, pd, critical, span, hot float64
	area, perimeter             float64 // of both faces m², of the liner m
	size                        float64 // usual wall m²
}

// warm is T/Ts of gas compressed to p: the adiabatic curve by a parabola, within 3 % of the rise.
func (k *climate) warm(p float64) float64 {
	t := min(max((p-k.ps)*k.span, 0), 1)
	return 1 + k.hot*t*(1.4-.4*t)
}

// rates gives at a grid point what each path passes, up to a constant of the path, as mass and as mass times T/Ts into
// the end, and the heat by temperature difference and by wall temperature.
type rates struct {
	suction, discharge, in, out float64 // kg
	warm, other                 float64 // T/Ts here and at the other end
	heat, wall                  float64
}

func (c *throwCtx) rates(k *climate, e, i int) (r rates) {
	p := c.th.P[e][i]
	r.warm = k.warm(p)
	r.suction = jet(p, k.ps, k.critical) / math.Sqrt(r.warm)
	r.discharge = jet(k.pd, p, k.critical)
	if o := c.th.P[1-e]; o != nil && c.th.Bad[1-e] == "" {
		r.other = k.warm(o[i])
		r.in, r.out = jet(o[i], p, k.critical)/math.Sqrt(r.other), jet(p, o[i], k.critical)/math.Sqrt(r.warm)
	}
	wall := k.area + k.perimeter*c.v[e][i]
	r.wall = wall / k.size * math.Exp(inFilm*math.Log(p/k.ps)-inFilmT*math.Log(r.warm)) / 360
	r.heat = r.wall * (1 + inWallT*k.hot - r.warm)
	return r
}

// strokes adds an end's closed strokes to the fit and books what each unknown costs its suction.
func (m *Measurer) strokes(c *throwCtx, f *takeIn, e int, kv float64) {
	w, cyl, g := &c.w.Ends[e], &c.in.Cylinder, c.th.Grid
	hot := adiabatic(c.in, w)/c.in.Ts - 1
	k := climate{ps: w.Ps, pd: w.Pd, critical: math.Pow(2/(kv+1), kv/(kv-1)), span: 1 / (w.Pd - w.Ps), hot: max(hot, 0),
		area: 2 * cyl.Area(e), perimeter: math.Pi * cyl.Bore / cyl.Area(e)}
	k.size = k.area + k.perimeter*(cyl.ClearanceVolume(e)+cyl.Swept(e)/2)
	from, to := c.rims(e)
	open := func(i int) bool { return i >= from && i < to || i+c.i1-c.i0 < to }
	every := max(1, int(math.Round(roomStep/g.Step)))
	deg := float64(every) * g.Step
	var all, part [inCount]float64
	net := 0.0
	for i := c.i0; i < c.i1; i += every {
		r := c.rates(&k, e, i)
		all[2*e] += r.suction
		part[2*e] += r.suction * r.warm
		all[2*e+1] += r.discharge
		all[4] += (r.in + r.out) / 2
		net += r.out - r.in
		if open(i) {
			part[2*e+1] += r.discharge * (1 + k.hot)
			part[4] += r.in * r.other
			part[inHeat] += r.heat * deg
			part[inWall] += r.wall * deg
		}
	}
	part[4] += net
	var scale [inCount]float64 // kg per unit of the unknown and of what rates gives for a degree
	for j := range scale {
		switch {
		case j == inHeat || j == inWall:
			scale[j] = f.mean
		case all[j] > 0:
			scale[j] = f.mean / all[j] / deg
			f.cost[e][j] = f.mean * part[j] / all[j]
		}
	}
	f.cost[e][inHeat], f.cost[e][inWall] = f.mean*part[inHeat], f.mean*part[inWall]
	for s := range w.Closed {
		m.stroke(c, f, e, kv, &k, &scale, w.Closed[s])
	}
}

// stroke adds one closed stroke, reduced to a few points, its own constant taken out.
func (m *Measurer) stroke(c *throwCtx, f *takeIn, e int, kv float64, k *climate, scale *[inCount]float64, run window.Run) {
	every := max(1, int(math.Round(lineStep/c.th.Grid.Step)))
	n := (run.I1 - run.I0 + every - 1) / every
	bins := min(inBins, n/3)
	if bins < 3 {
		return
	}
	energy := kv * c.in.Gas.Zs * c.in.Gas.R * c.in.Ts * c.th.Grid.Step * float64(every)
	var rows [inBins][inCount + 1]float64
	var sum, mean [inCount + 1]float64
	p, v := c.th.P[e], c.v[e]
	var count [inBins]float64
	for at := range n {
		i := run.I0 + at*every
		r := c.rates(k, e, i)
		per := energy / (p[i] * v[i])
		row := [inCount + 1]float64{inHeat: r.heat, inWall: r.wall}
		row[2*e], row[2*e+1] = -r.suction*r.warm, r.discharge*(1+k.hot)
		row[4] = r.in*r.other - r.out*r.warm
		b := &rows[at*bins/n]
		count[at*bins/n]++
		for j := range inZero {
			sum[j] += row[j] * scale[j] * per
			b[j] += sum[j]
		}
		b[inZero+e] += k.ps / p[i]
		b[inPhase] += kv * (v[i+1] - v[i-1]) / (2 * c.th.Grid.Step * v[i])
		ln := math.Log(v[i])
		b[inExponent] -= ln
		b[inCount] += math.Log(p[i]) + kv*ln
	}
	for b := range bins {
		for j := range rows[b] {
			rows[b][j] /= count[b]
			mean[j] += rows[b][j] / float64(bins)
		}
	}
	weight := 1 / (inSigma * inSigma)
	for b := range bins {
		for j := range rows[b] {
			rows[b][j] -= mean[j]
		}
		for j := range inCount {
			for l := range inCount {
				f.ata[j][l] += weight * rows[b][j] * rows[b][l]
			}
			f.atb[j] += weight * rows[b][j] * rows[b][inCount]
		}
	}
}

// inPasses is how often the fit is made: a leak that turns out larger than its prior is given a prior of its own size the
// next time, so that large leaks are not drawn towards none.
const inPasses = 3

func (f *takeIn) solve(phase float64) {
	prior := inPrior(phase)
	for range inPasses {
		f.solveWith(&prior)
		for j := range inHeat {
			prior[j] = max(prior[j], math.Abs(f.x[j]))
		}
	}
}

// solveWith adds priors and solves by Gauss and Jordan's elimination; the matrix is positive definite and small.
func (f *takeIn) solveWith(prior *[inCount]float64) {
	a := f.ata
	f.cov, f.x = [inCount][inCount]float64{}, [inCount]float64{}
	for j, s := range prior {
		a[j][j] += 1 / (s * s)
		f.cov[j][j] = 1
	}
	for j := range a {
		pivot := 1 / a[j][j]
		for l := range a {
			a[j][l] *= pivot
			f.cov[j][l] *= pivot
		}
		for i := range a {
			if q := a[i][j]; i != j && q != 0 {
				for l := range a {
					a[i][l] -= q * a[j][l]
					f.cov[i][l] -= q * f.cov[j][l]
				}
			}
		}
	}
	for j := range f.x {
		for l := range f.atb {
			f.x[j] += f.cov[j][l] * f.atb[l]
		}
	}
}

// fresh gives what an end delivers, kg a turn, and its standard deviation.
func (f *takeIn) fresh(e int) (mass, sigma float64) {
	mass = f.mass[e]
	for j, q := range f.cost[e] {
		mass -= q * f.x[j]
		for l, q2 := range f.cost[e] {
			sigma += q * q2 * f.cov[j][l]
		}
	}
	return mass, math.Sqrt(sigma)
}
