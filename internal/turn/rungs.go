package turn

import (
	"math"

	"lapwing/internal/dsp"
)

const (
	sigmaSteps   = 0.5 // σ of the Gaussian in grid steps
	sigmaSamples = 0.8 // and at least, in samples
	reachSigmas  = 4.0 // where the Gaussian is cut off
	rungs        = 256 // σ is rounded up to exp(i/rungs), by less than 0.4 %:
	roundedUp    = 1.004
)

// width gives σ in samples for the local number of samples per grid step.
func width(perStep float64) float64 { return max(sigmaSteps*perStep, sigmaSamples) }

// rung is one of the widths that σ is rounded up to, exp(i/rungs): lo < σ <= hi is taken as hi.
type rung struct {
	i      float64
	lo, hi float64
}

func (r *rung) has(sigma float64) bool { return r.lo < sigma && sigma <= r.hi }

// of makes it the rung of σ.
func (r *rung) of(sigma float64) {
	step := func(i float64) float64 { return math.Exp(i / rungs) }
	i := math.Ceil(rungs * math.Log(sigma))
	for sigma <= step(i-1) { // the bounds decide, not the logarithm's last bit
		i--
	}
	for sigma > step(i) {
		i++
	}
	*r = rung{i, step(i - 1), step(i)}
}

// ladder holds line fits under the widths used of late: the speed within a turn goes up and down a few rungs, and comes
// back to them in the next.
type ladder struct {
	rung [8]rung
	fit  [8]dsp.LineFit
	at   int // the one used last
}

// step gives the line fit for σ and its rung.
func (l *ladder) step(sigma float64) (*dsp.LineFit, *rung) {
	for k := range l.rung {
		j := (l.at + k) % len(l.rung)
		if l.rung[j].has(sigma) {
			l.at = j
			return &l.fit[j], &l.rung[j]
		}
	}
	var r rung
	r.of(sigma)
	l.at = int(r.i) & (len(l.rung) - 1)
	l.rung[l.at] = r
	l.fit[l.at].Set(r.hi, reach(r.hi))
	return &l.fit[l.at], &l.rung[l.at]
}

// reach is how many samples to either side a Gaussian takes.
func reach(sigma float64) int { return int(math.Ceil(reachSigmas * sigma)) }

// runs calls f with every run of grid points [i, j) whose widths, at least so many samples, have the same rung.
func (l *ladder) runs(perDeg []float64, step, least float64, f func(fit *dsp.LineFit, i, j int)) {
	for i := 0; i < len(perDeg); {
		fit, r := l.step(max(width(step*perDeg[i]), least))
		j := i + 1
		for j < len(perDeg) && r.has(max(width(step*perDeg[j]), least)) {
			j++
		}
		f(fit, i, j)
		i = j
	}
}
