package leak

import (
	"math"

	"lapwing/internal/crank"
)

const degPerRad = 180 / math.Pi

// Fitter fits turns; it keeps scratch between them and is not for use by two goroutines at once.
type Fitter struct {
	set  Settings
	rows [][unknowns]float64
	y    []float64
}

// NewFitter makes a fitter with the settings, defaults where they are zero.
func NewFitter(set Settings) *Fitter { return &Fitter{set: set.withDefaults()} }

// Reasons for a path that is not seen.
const (
	noStroke    = "no closed stroke of this end"
	ringsIdle   = "one end idle: rings look like a suction leak of the working end"
	ringsLate   = "late closing on both ends: rings look like suction leaks of both"
	ringsBlind  = "no pressure on the other side of the rings"
	onlyStroke  = "fewer than two usable closed strokes"
	notSeparate = "the paths cannot be told apart on these strokes"
)

// Fit sizes the leak paths of one turn.
func (f *Fitter) Fit(in *Input) Fit {
	if err := in.check(); err != nil {
		return absent(err.Error())
	}
	var strokes []stroke
	var seen [2]bool
	out := Fit{}
	for end := range in.P {
		if in.P[end] == nil {
			continue
		}
		for kind := range in.Closed[end] {
			s, ok := in.window(f.set, end, kind)
			if !ok {
				continue
			}
			strokes = append(strokes, s)
			seen[end] = true
			out.Used[end][kind] = true
		}
	}
	if len(strokes) < 2 {
		a := absent(onlyStroke)
		a.Used = out.Used
		return a
	}

	var q normal
	q.use[phase] = true
	for end, ok := range seen {
		q.use[HS+2*end], q.use[HD+2*end], q.use[zeroHE+end] = ok, ok, ok
		if !ok {
			out.Why[HS+2*end], out.Why[HD+2*end] = noStroke, noStroke
		}
	}
	switch {
	case in.P[crank.HE] == nil || in.P[crank.CE] == nil:
		out.Why[RG] = ringsBlind
		out.SuctionOrRings = true
	case !seen[crank.HE] || !seen[crank.CE]:
		out.Why[RG] = ringsIdle
		out.SuctionOrRings = true
	case in.Late[crank.HE] && in.Late[crank.CE]:
		out.Why[RG] = ringsLate
		out.SuctionOrRings = true
	default:
		q.use[RG] = true
	}

	// First from the grid and the pressures as they came, then once more about the shift and the zeros found, because
	// both bend the lines more than in proportion.
	sol, ok := f.pass(&q, in, strokes, &out)
	if ok && out.far(in.Ps) {
		again := normal{use: q.use}
		sol, ok = f.pass(&again, in, strokes, &out)
		q = again
	}
	if !ok {
		a := absent(notSeparate)
		a.Used = out.Used
		return a
	}
	f.fill(&out, in, &q, &sol)
	return out
}

// far reports whether phase or zeros are so large that the fit must be made anew about them.
func (f *Fit) far(ps float64) bool {
	return math.Abs(f.Phase) > .05 || math.Abs(f.Zero[crank.HE]) > 1e-3*ps || math.Abs(f.Zero[crank.CE]) > 1e-3*ps
}

// pass builds and solves the problem about the phase and the zeros in out (zero at first) and adds what it finds.
func (f *Fitter) pass(q *normal, in *Input, strokes []stroke, out *Fit) (solution, bool) {
	for _, s := range strokes {
		f.addStroke(q, in, s, out.Phase, out.Zero)
	}
	out.Points = q.n
	free := q.n - len(strokes)
	for _, u := range q.use {
		if u {
			free--
		}
	}
	if free < 1 {
		return solution{}, false
	}
	// The prior of the zeros is in units of the noise, which is only known after a first solution.
	out.sigma = firstNoise
	var sol solution
	for range 2 {
		var prior, centre [unknowns]float64
		zero := out.sigma / (f.set.ZeroSD * in.Ps)
		for end := range out.Zero {
			prior[zeroHE+end], centre[zeroHE+end] = zero*zero, -out.Zero[end]
		}
		var ok bool
		if sol, ok = q.solve(&prior, &centre); !ok {
			return sol, false
		}
		out.sigma = max(math.Sqrt(sol.ss/float64(free)), leastNoise)
	}
	out.Phase += sol.x[phase] * degPerRad
	for end := range out.Zero {
		out.Zero[end] += sol.x[zeroHE+end]
	}
	return sol, true
}

// Noise of ln p per point: what is assumed before the first solution, and the least that is believed after it.
const (
	firstNoise = 1e-3
	leastNoise = 1e-6
)

// addStroke puts one stroke's points into the normal equations: every column cumulated by the trapezoidal rule where
// it is a rate, then centred on the stroke, which is the free constant of integration. shift (degrees) and zero (Pa)
// are taken off the grid and the pressures first.
func (f *Fitter) addStroke(q *normal, in *Input, s stroke, shift float64, zero [2]float64) {
	n := s.To - s.From
	if cap(f.rows) < n {
		f.rows, f.y = make([][unknowns]float64, n), make([]float64, n)
	}
	rows, y := f.rows[:n], f.y[:n]

	noz := newNozzle(in.K)
	other := 1 - s.end
	suction, discharge := HS+2*s.end, HD+2*s.end
	dth := in.Step / degPerRad
	var before [unknowns]float64 // rates at the point before
	var mean [unknowns]float64
	meanY := 0.0
	for j := range n {
		i := s.From + j
		p, v := in.P[s.end][i]-zero[s.end], in.V[s.end][i]
		if shift != 0 {
			v = in.Cylinder.Volume(s.end, in.deg(i)+shift)
		}
		rt := in.rt(s.end, i, p)
		vOmega := v * in.omega(i)
		var rate [unknowns]float64
		rate[suction] = in.K * noz.rate(p, rt, in.Ps, in.RZ*in.Ts, vOmega)
		rate[discharge] = in.K * noz.rate(p, rt, in.Pd, in.RZ*in.Td, vOmega)
		if q.use[RG] {
			po := in.P[other][i] - zero[other]
			rate[RG] = in.K * noz.rate(p, rt, po, in.rt(other, i, po), vOmega)
		}
		rows[j] = [unknowns]float64{}
		if j > 0 {
			for c := range Paths {
				rows[j][c] = rows[j-1][c] + dth*(before[c]+rate[c])/2
			}
		}
		before = rate
		// A grid that reads δ too low computes V at the wrong place: Y falls by k V′/V δ.
		rows[j][phase] = -in.K * in.Cylinder.DVolume(s.end, in.deg(i)+shift) / v
		// A transducer that reads z too high raises ln p by z/p.
		rows[j][zeroHE+s.end] = 1 / p
		y[j] = math.Log(p) + in.K*math.Log(v)
		for c := range mean {
			mean[c] += rows[j][c] / float64(n)
		}
		meanY += y[j] / float64(n)
	}
	for j := range rows {
		for c := range mean {
			rows[j][c] -= mean[c]
		}
		q.add(&rows[j], y[j]-meanY)
	}
}

// fill turns a solution into people's terms.
func (f *Fitter) fill(out *Fit, in *Input, q *normal, sol *solution) {
	sd := func(u int) float64 { return out.sigma * math.Sqrt(sol.inv[u]) }
	nan := math.NaN()
	flow := in.massPerArea()
	for j := range Paths {
		if !q.use[j] {
			out.Area[j], out.SD[j], out.Mass[j] = nan, nan, nan
			continue
		}
		out.Area[j], out.SD[j] = sol.x[j], sd(j)
		out.Mass[j] = sol.x[j] * flow[j]
	}
	out.PhaseSD = sd(phase) * degPerRad
	for end := range out.Zero {
		out.ZeroSD[end] = sd(zeroHE + end)
		if !q.use[zeroHE+end] {
			out.Zero[end], out.ZeroSD[end] = nan, nan
		}
	}
	out.RMS = math.Sqrt(sol.ss / float64(q.n))
}

// massPerArea gives the mass that one turn drives through one square metre of each path, kg/m². Where a valve is open
// there is next to no pressure across it, so the whole turn may be counted.
func (in *Input) massPerArea() (m [Paths]float64) {
	noz := newNozzle(in.K)
	flow := func(pa, rta, pb, rtb float64) float64 {
		if pa < pb {
			pa, rta, pb = pb, rtb, pa
		}
		return pa / math.Sqrt(rta) * noz.psi(pb/pa)
	}
	for end, p := range in.P {
		for i := range p {
			if deg := in.deg(i); deg < 0 || deg >= 360 {
				continue
			}
			dt := in.Step / degPerRad / in.omega(i)
			rt := in.rt(end, i, p[i])
			if p[i] > in.Ps {
				m[HS+2*end] += dt * flow(p[i], rt, in.Ps, in.RZ*in.Ts)
			}
			if p[i] < in.Pd {
				m[HD+2*end] += dt * flow(p[i], rt, in.Pd, in.RZ*in.Td)
			}
			if end == crank.HE && in.P[crank.CE] != nil {
				m[RG] += dt * flow(p[i], rt, in.P[crank.CE][i], in.rt(crank.CE, i, in.P[crank.CE][i]))
			}
		}
	}
	return m
}
