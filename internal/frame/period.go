package frame

import "math"

// periods remembers the newest periods and says when the next mark is due.
type periods struct {
	rate float64
	ln   [4]float64 // logarithms of the newest periods in samples, newest last
	n    int
}

// Speed changes. A reciprocating machine on its driver changes its speed by at most some 10 % per second while it
// runs; twice that is allowed for. Within a turn the change grows with the turn's length.
const (
	slack      = 0.08 // of a period: how early or late a mark may come at steady speed
	unevenFrom = 0.01 // of a period: from here on it is noted
	perSecond  = 0.2  // of a period and second: added for a machine that changes its speed
	loosest    = 0.30 // of a period: beyond that a mark could belong to either of two turns
)

func (p *periods) push(samples float64) {
	if p.n == len(p.ln) {
		copy(p.ln[:], p.ln[1:])
		p.n--
	}
	p.ln[p.n] = math.Log(samples)
	p.n++
}

// trend gives the change of ln period from turn to turn.
func (p *periods) trend() float64 {
	var s float64
	switch d := p.ln; p.n {
	case 0, 1:
		return 0
	case 2:
		s = d[1] - d[0]
	case 3:
		s = (d[2] - d[0]) / 2
	default:
		s = median3([3]float64{d[1] - d[0], d[2] - d[1], d[3] - d[2]})
	}
	most := perSecond * math.Exp(p.ln[p.n-1]) / p.rate
	return min(max(s, -most), most)
}

// slowing reports whether the shaft has lost more than 2 % of its speed in each of the last turns: it coasts down.
func (p *periods) slowing() bool {
	return p.n == len(p.ln) && p.ln[3]-p.ln[0] > 3*0.02
}

// expected gives the next period in samples: the median of the newest three, carried forward along the trend.
func (p *periods) expected() float64 {
	s := p.trend()
	switch n := p.n; n {
	case 0:
		return 0
	case 1, 2:
		return math.Exp(p.ln[n-1] + s)
	default:
		return math.Exp(median3([3]float64{p.ln[n-1] + s, p.ln[n-2] + 2*s, p.ln[n-3] + 3*s}))
	}
}

// tolerance gives how far from k periods a mark may lie, as a fraction of the period in samples.
func (p *periods) tolerance(period float64, k int) float64 {
	return min(loosest, float64(k)*(slack+perSecond*period/p.rate))
}

// uneven reports whether a period differs from the expected one by more than a running machine changes its speed.
func (p *periods) uneven(period, expected float64) bool {
	return math.Abs(period/expected-1) > unevenFrom+0.75*perSecond*expected/p.rate
}

// steady reports whether two neighbouring periods are close enough to be turns of one machine.
func (p *periods) steady(a, b float64) bool {
	return math.Abs(math.Log(b/a)) <= 0.04+perSecond*max(a, b)/p.rate
}
