package leak

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
)

const degPerRad = 180 / math.Pi

// Fitter fits turns; it keeps scratch between them and is not for use by two goroutines at once.
type Fitter struct {
	set  Settings
	rows [][sUnknowns]float64
	y    []float64
	lnV  []float64

	strokes []stroke
	shapes  shapes
	gas     table
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
	strokes := f.strokes[:0]
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
	f.strokes = strokes
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

	// Shift and zeros bend the lines more than in proportion, so the fit is made about those that a rough one finds, if
	// they matter.
	st := in.states()
	about := f.rough(q, in, &st, strokes, &out)
	begin := q
	sol, ok := f.pass(&q, in, &st, strokes, &out, 1)
	if ok && !about && out.far(in.Ps) {
		q = begin
		sol, ok = f.pass(&q, in, &st, strokes, &out, 1)
	}
	if !ok {
		a := absent(notSeparate)
		a.Used = out.Used
		return a
	}
	f.fill(&out, in, &st, &q, &sol)
	return out
}

// far reports whether phase or zeros are so large that the fit must be made anew about them.
func (f *Fit) far(ps float64) bool {
	return math.Abs(f.Phase) > .05 || math.Abs(f.Zero[crank.HE]) > 1e-3*ps || math.Abs(f.Zero[crank.CE]) > 1e-3*ps
}

// roughly is how many grid steps the rough fit takes at once, and roughPts how many points it wants in a stroke.
const (
	roughly  = 6
	roughPts = 6
)

// rough puts into out the phase and the zeros that every sixth point gives, when they are far from nothing.
func (f *Fitter) rough(q normal, in *Input, st *states, strokes []stroke, out *Fit) bool {
	for _, s := range strokes {
		if s.To-s.From < roughly*roughPts {
			return false
		}
	}
	try := *out
	if _, ok := f.pass(&q, in, st, strokes, &try, roughly); !ok || !try.far(in.Ps) {
		return false
	}
	out.Phase, out.Zero = try.Phase, try.Zero
	return true
}

// pass builds and solves the problem about the phase and the zeros in out, from every so-manyth point, and adds what it
// finds to them.
func (f *Fitter) pass(q *normal, in *Input, st *states, strokes []stroke, out *Fit, every int) (solution, bool) {
	f.gas.forget(in)
	for _, s := range strokes {
		f.addStroke(q, in, st, s, out.Phase, out.Zero, every)
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

// A stroke moves five unknowns: the two valve groups of its end, the rings, the phase and the zero of its end.
const (
	sSuction = iota
	sDischarge
	sRings
	sPhase
	sZero
	sUnknowns
	sAreas = sRings + 1
)

// addStroke puts one stroke's points into the normal equations: every column cumulated by the trapezoidal rule where
// it is a rate, then centred on the stroke, which is the free constant of integration. shift (degrees) and zero (Pa)
// are taken off the grid and the pressures first.
func (f *Fitter) addStroke(q *normal, in *Input, st *states, s stroke, shift float64, zero [2]float64, every int) {
	n := (s.To - s.From + every - 1) / every
	if cap(f.rows) < n {
		f.rows, f.y, f.lnV = make([][sUnknowns]float64, n), make([]float64, n), make([]float64, n)
	}
	rows, y, lnVs := f.rows[:n], f.y[:n], f.lnV[:n]

	other, compress := 1-s.end, s.kind == Compression
	rings := q.use[RG]
	half := in.Step * float64(every) / degPerRad / 2
	perK, perOmega := in.K, 1/in.omega(0)
	shape := f.shapes.of(in, s.end, shift)
	owns := f.gas.of(in, st, s.end, s.Range, every, zero[s.end], compress)
	var others []gas
	if rings {
		others = f.gas.of(in, st, other, s.Range, every, zero[other], !compress)
	}
	var before [sAreas]float64 // rates at the point before
	var sum [sUnknowns]float64
	sumY := 0.0
	var way polytrope
	for j := range n {
		i := s.From + j*every
		v, lnV, slope := shape.at(i)
		own := &owns[i]
		if len(in.Omega) > 1 {
			perOmega = 1 / in.Omega[i]
		}
		scale := perK * perOmega / v
		var rate [sAreas]float64
		rate[sSuction] = st.rate(own, &st.suction, scale)
		rate[sDischarge] = st.rate(own, &st.discharge, scale)
		if rings {
			rate[sRings] = st.rate(own, &others[i], scale)
		}
		row := &rows[j]
		if j == 0 {
			*row = [sUnknowns]float64{}
		} else {
			last := &rows[j-1]
			for c := range rate {
				row[c] = last[c] + half*(before[c]+rate[c])
			}
		}
		before = rate
		// A grid that reads δ too low computes V at the wrong place: Y falls by k V′/V δ.
		row[sPhase] = -in.K * slope
		way.add(lnV, own.lnP)
		lnVs[j] = lnV
		y[j] = own.lnP + in.K*lnV
		for c, x := range row {
			sum[c] += x
		}
		sumY += y[j]
	}
	// A transducer that reads z too high raises ln p by z/p. The p in it is that of the polytrope through the stroke:
	// each point's own would put the noise of ln p, turned round, into the column, and the fit would take the noise for
	// a zero.
	way.ready()
	sum[sZero] = 0
	for j, lnV := range lnVs {
		lnVs[j] = -way.at(lnV)
	}
	dsp.Exps(lnVs, lnVs)
	for j, inverse := range lnVs {
		rows[j][sZero] = inverse
		sum[sZero] += inverse
	}
	var mean [sUnknowns]float64
	for c := range sum {
		mean[c] = sum[c] / float64(n)
	}
	meanY := sumY / float64(n)
	for j := range rows {
		for c := range mean {
			rows[j][c] -= mean[c]
		}
		y[j] -= meanY
	}
	q.addRows([sUnknowns]int{HS + 2*s.end, HD + 2*s.end, RG, phase, zeroHE + s.end}, rows, y)
}

// polytrope is the straight line through ln p over ln V.
type polytrope struct{ n, x, y, xx, xy, slope float64 }

func (w *polytrope) add(x, y float64) {
	if w.n == 0 {
		w.slope = x // of the first point, to keep the sums small
	}
	x -= w.slope
	w.n, w.x, w.y, w.xx, w.xy = w.n+1, w.x+x, w.y+y, w.xx+x*x, w.xy+x*y
}

func (w *polytrope) ready() {
	x0 := w.slope
	w.slope = (w.xy - w.x*w.y/w.n) / (w.xx - w.x*w.x/w.n)
	w.x, w.y = x0+w.x/w.n, w.y/w.n
}

func (w *polytrope) at(x float64) float64 { return w.y + w.slope*(x-w.x) }

// fill turns a solution into people's terms.
func (f *Fitter) fill(out *Fit, in *Input, st *states, q *normal, sol *solution) {
	sd := func(u int) float64 { return out.sigma * math.Sqrt(sol.variance(u)) }
	nan := math.NaN()
	flow := [Paths]float64{nan, nan, nan, nan, nan}
	if f.set.Mass {
		flow = in.massPerArea(st)
	}
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

// massDeg is the step of the sum over a turn, degrees.
const massDeg = 6

// massPerArea gives the mass that one turn drives through one square metre of each path, kg/m². Where a valve is open
// there is next to no pressure across it, so the whole turn may be counted. It is a sum over a whole period, so points
// massDeg apart are near enough (0.3 %, tested).
func (in *Input) massPerArea(st *states) [Paths]float64 {
	return in.massEvery(st, max(1, int(massDeg/in.Step)))
}

func (in *Input) massEvery(st *states, every int) (m [Paths]float64) {
	flow := func(a, b gas) float64 {
		if a.p < b.p {
			a, b = b, a
		}
		return a.p * math.Sqrt(st.n.square(b.p*a.inv, b.a*a.invA)/a.rt)
	}
	for i := 0; i < max(len(in.P[crank.HE]), len(in.P[crank.CE])); i += every {
		deg := in.deg(i)
		if deg < 0 || deg >= 360 {
			continue
		}
		dt := float64(every) * in.Step / degPerRad / in.omega(i)
		var own [2]gas
		for end, p := range in.P {
			if p == nil {
				continue
			}
			own[end] = st.at(p[i], compressing(end, deg))
			if p[i] > in.Ps {
				m[HS+2*end] += dt * flow(own[end], st.suction)
			}
			if p[i] < in.Pd {
				m[HD+2*end] += dt * flow(own[end], st.discharge)
			}
		}
		if in.P[crank.HE] != nil && in.P[crank.CE] != nil {
			m[RG] += dt * flow(own[crank.HE], own[crank.CE])
		}
	}
	return m
}
