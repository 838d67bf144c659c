package frame

import "math"

const (
	swingsKept = 8
	leastSwing = 16  // codes: less is no tooth's signal
	reversal   = 0.3 // of the usual swing: what the signal must turn back by before it counts
)

// toothDetector finds the active edges of teeth. A tooth's signal swings between a top and a bottom; what counts is that
// it turns back by a good part of the usual swing, so that drifting levels and teeth of a third of the height are
// still seen. The mark is where the edge passes the level: the given one, or the middle of the usual tops and bottoms,
// or the middle of its own edge when that does not reach it.
type toothDetector struct {
	cfg    *Config
	ring   *ring
	holes  *spans
	survey *survey
	sign   float64 // z = sign·code: the active edge rises

	have        bool
	level       float64 // of z
	usual       float64 // swing
	delta       float64
	tops, lows  [swingsKept]float64
	n           int
	sinceSearch int

	high     bool
	fresh    bool    // no bottom seen yet since restart
	lo, hi   float64 // extremes of z since the last turn of direction
	trig     int64
	cross    float64
	crossed  bool
	inHole   bool
	back     int64 // samples an edge may have begun before its trigger
	most     int64
	lostEdge int64
}

func newToothDetector(cfg *Config, r *ring, holes *spans) *toothDetector {
	d := &toothDetector{cfg: cfg, ring: r, holes: holes, sign: 1, fresh: true,
		survey: newSurvey(max(4, int(cfg.Rate*60/cfg.MaxRPM/8)), cfg.Rate*60/cfg.MinRPM)}
	if cfg.Edge == Falling {
		d.sign = -1
	}
	slowest := cfg.Rate * 60 / cfg.MinRPM
	d.back = int64(slowest/float64(cfg.Wheel.Teeth)) + 2
	d.most = int64(slowest)
	return d
}

func (d *toothDetector) restart() {
	d.survey.restart()
	d.high, d.fresh, d.sinceSearch = false, true, 0
	d.lo, d.hi = math.Inf(1), math.Inf(-1)
}

// search looks for the swing from the range of the signal, if it is time.
func (d *toothDetector) search() {
	if d.sinceSearch++; d.sinceSearch < max(searchEvery, d.survey.held()/16) {
		return
	}
	d.sinceSearch = 0
	bottom, top, ok := d.survey.span()
	swing := top - bottom
	if !ok || swing < leastSwing {
		return
	}
	if d.sign < 0 {
		bottom, top = -top, -bottom
	}
	mid := (top + bottom) / 2
	if d.have && swing < 1.7*d.usual && d.usual < 1.7*swing && (!d.cfg.Auto || math.Abs(mid-d.level) < 0.2*swing) {
		return
	}
	d.have, d.n = true, 0
	d.set(bottom, top)
}

func (d *toothDetector) set(bottom, top float64) {
	d.usual = top - bottom
	d.level = (top + bottom) / 2
	if !d.cfg.Auto {
		d.level = d.sign * d.cfg.Threshold
	}
	if d.delta = d.cfg.Hysteresis; d.delta == 0 {
		d.delta = reversal * d.usual
	}
}

// step takes sample j and gives the tooth that it completes, if any.
func (d *toothDetector) step(j int64, locked bool) (pulse, bool) {
	v := d.ring.code(d.cfg.Channel, j)
	if d.survey.add(v) && !locked {
		d.search()
	}
	if !d.have {
		return pulse{}, false
	}
	z := d.sign * float64(v)
	if !d.high {
		if z < d.lo {
			d.lo = z
		} else if z-d.lo >= d.delta {
			d.high, d.trig, d.hi, d.crossed = true, j, z, false
			if z >= d.level && d.lo < d.level {
				d.edge(j, d.level)
			}
		}
		return pulse{}, false
	}
	if !d.crossed && d.lo < d.level && z >= d.level {
		d.place(j, d.level)
	}
	if z > d.hi {
		d.hi = z
	}
	if d.hi-z < d.delta {
		return pulse{}, false
	}
	return d.end(j, z)
}

// end closes a tooth when the signal has turned down again.
func (d *toothDetector) end(j int64, z float64) (pulse, bool) {
	lo, hi := d.lo, d.hi
	d.high, d.lo = false, z
	if d.fresh { // what lay before is not known
		d.fresh = false
		return pulse{}, false
	}
	if !d.crossed {
		if !d.cfg.Auto || j-d.trig >= d.most || d.trig-d.back <= d.ring.first {
			return pulse{}, false
		}
		mid := (lo + hi) / 2
		if d.z(d.trig) >= mid {
			d.edge(d.trig, mid)
		} else {
			k := d.trig
			for k < j && d.z(k) < mid {
				k++
			}
			d.place(k, mid)
		}
	}
	p := pulse{pos: d.cross, height: hi - lo}
	d.tops[d.n%swingsKept], d.lows[d.n%swingsKept] = hi, lo
	if d.n++; d.n > 1<<20 {
		d.n -= 1 << 19
	}
	if d.n >= 3 {
		m := min(d.n, swingsKept)
		a, b := d.tops, d.lows
		d.set(medianOf(b[:m]), medianOf(a[:m]))
	}
	if d.inHole {
		d.lostEdge++
		return pulse{}, false
	}
	return p, true
}

func (d *toothDetector) z(j int64) float64 { return d.sign * float64(d.ring.code(d.cfg.Channel, j)) }

// edge looks back from j, which lies above the level, for the sample that first does.
func (d *toothDetector) edge(j int64, level float64) {
	for first := max(d.ring.first+1, j-d.back); j > first && d.z(j-1) >= level; {
		j--
	}
	d.place(j, level)
}

// place puts the mark between samples j-1 and j.
func (d *toothDetector) place(j int64, level float64) {
	d.crossed = true
	d.inHole = d.holes.meet(j-1, j+1)
	a, b := d.z(max(j-1, d.ring.first)), d.z(j)
	f := 1.0
	if b > a {
		f = min(max((level-a)/(b-a), 0), 1)
	}
	d.cross = float64(j-1) + f
}

// needs gives the oldest sample that the detector may still look at.
func (d *toothDetector) needs(j int64) int64 {
	if d.high {
		return max(min(j, d.trig), j-d.most) - d.back - 3
	}
	return j - d.back - 3
}
