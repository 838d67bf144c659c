package datum

import "math"

// floor is the least half-width of each unknown, from what the estimate was off on modelled machines where it thought
// itself surer: what it does not know of is in it (pulsation, the slope of a mean over turns, real valves' leaks).
var floor = vector{uShift: .06 * math.Pi / 180, uClearHE: .001, uClearCE: .001, uZeroHE: .0015, uZeroCE: .0015, uK: .002,
	uHeat: .3, uArea + RG: .1}

// Estimate makes the joint estimate for one cylinder.
func Estimate(in *Input, pri Priors) Result {
	if err := in.check(); err != nil {
		return absent(err.Error())
	}
	pri = pri.withDefaults()
	var jobs [laws]*job
	var fits [laws]solved
	for l := range jobs {
		jobs[l] = newJob(in, pri, law(l))
		if len(jobs[l].list) < 2 {
			return absent("datum: fewer than two usable closed strokes")
		}
		var err error
		if fits[l], err = jobs[l].solve(); err != nil {
			return absent(err.Error())
		}
	}
	// The mean over the laws is the estimate; their spread is part of its error.
	var x, u vector
	for i := range x {
		for l := range fits {
			x[i] += fits[l].x[i] / laws
		}
		spread, formal, jack := 0.0, 0.0, 0.0
		for l := range fits {
			spread += (fits[l].x[i] - x[i]) * (fits[l].x[i] - x[i]) / (laws - 1)
			formal += fits[l].inv[i][i] / laws
		}
		for l := range fits {
			jack += jobs[l].jackknife(&fits[l], i) / laws
		}
		u[i] = math.Sqrt(4*(spread+formal+jack) + floor[i]*floor[i])
	}
	return jobs[0].result(x, u, fits)
}

// jackknife is the variance of an unknown by leaving out one duty after the other; 0 with fewer than three.
func (j *job) jackknife(s *solved, u int) float64 {
	n := 0.0
	var dx []float64
	mean := 0.0
	for d := range j.in.Duties {
		if !j.uses(d) {
			continue
		}
		if v, _, ok := j.step(s, d); ok {
			dx = append(dx, v[u])
			mean += v[u]
			n++
		}
	}
	if n < 3 {
		return 0
	}
	mean /= n
	ss := 0.0
	for _, v := range dx {
		ss += (v - mean) * (v - mean)
	}
	return (n - 1) / n * ss
}

// result puts the unknowns into people's terms.
func (j *job) result(x, u vector, fits [laws]solved) Result {
	r := absent("")
	deg := 180 / math.Pi
	r.DeadCentreDeg = Value{x[uShift] * deg, u[uShift] * deg}
	for e := range 2 {
		if j.use[uClearHE+e] {
			r.Clearance[e] = Value{x[uClearHE+e], u[uClearHE+e]}
			r.Zero[e] = Value{x[uZeroHE+e] * j.ps, u[uZeroHE+e] * j.ps}
		}
	}
	r.K = Value{x[uK], u[uK]}
	r.HeatScale = Value{math.Exp(x[uHeat]), math.Exp(x[uHeat]) * u[uHeat]}
	for p := range Paths {
		if j.use[uArea+p] {
			r.Area[p] = Value{x[uArea+p] * j.unit[p], u[uArea+p] * j.unit[p]}
		}
	}
	r.RMS = math.Inf(1)
	for l := range fits {
		r.DeadCentreByLaw[l] = fits[l].x[uShift] * deg
		r.RMS = math.Min(r.RMS, fits[l].rms)
	}
	j.remark(&r)
	r.Strokes, r.Points = len(j.list), fits[0].points
	return r
}

// remark counts duties and says what would make the estimate better.
func (j *job) remark(r *Result) {
	var ratio, speed [2]float64
	turns := 0
	for d := range j.in.Duties {
		if !j.uses(d) {
			continue
		}
		y := &j.in.Duties[d]
		a, b := y.Pd/y.Ps, y.omega(0)
		if r.Duties == 0 {
			ratio, speed, turns = [2]float64{a, a}, [2]float64{b, b}, y.Turns
		}
		ratio = [2]float64{math.Min(ratio[0], a), math.Max(ratio[1], a)}
		speed = [2]float64{math.Min(speed[0], b), math.Max(speed[1], b)}
		turns = min(turns, y.Turns)
		r.Duties++
	}
	say := func(s string) { r.Remarks = append(r.Remarks, s) }
	if ratio[1] < 1.3*ratio[0] {
		say("one pressure ratio only: zeros, exponent and clearances lean on what they are assumed to be; several ratios tell them apart")
	}
	if speed[1] < 1.1*speed[0] {
		say("one speed only: wall heat and leaks lean on what they are assumed to be; a second speed tells them apart")
	}
	if turns < fewTurns {
		say("few turns a duty: their scatter is not averaged out")
	}
	if r.RMS > muchLeft {
		say("the strokes do not follow the equation: a leak beyond a healthy one, a passage that rings, valves that are not shut, or a wrong gas; do not use the estimate")
	}
	for e := range 2 {
		if j.use[uClearHE+e] != j.use[uClearHE+1-e] && !j.in.NoValves {
			say("one end only: its leaks and its dead centre lean on what they are assumed to be")
			break
		}
	}
}

const (
	fewTurns = 8
	muchLeft = 6e-4 // of ln p; healthy modelled machines leave 1e-4 to 2e-4
)

func (j *job) uses(duty int) bool {
	for _, s := range j.list {
		if s.duty == duty {
			return true
		}
	}
	return false
}
