package turn

import (
	"math"

	"lapwing/internal/dsp"
)

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

// lines fills in the values of one pressure or two without a passage to undo. off is where in x the sample at position
// 0 lies.
func (h *hand) lines(p, x [2][]float64, pos []float64, step float64, off int64) {
	for i := 0; i < len(pos); {
		fit, r := h.ladder.step(width(step * h.perDeg[i]))
		j := i + 1
		for j < len(pos) && r.has(width(step*h.perDeg[j])) {
			j++
		}
		part := [2][]float64{p[0][i:j]}
		if x[1] != nil {
			part[1] = p[1][i:j]
		}
		fit.At(part, pos[i:j], x, -off)
		i = j
	}
}
