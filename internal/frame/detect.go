package frame

import "math"

// pulse is one excursion of the phase signal with its mark.
type pulse struct {
	pos     float64 // sample position of the mark
	height  float64 // codes
	bounced bool
}

// Phases of the detector.
const (
	waiting  = iota // for the signal to fall back, to be ready
	ready           // for the next pulse
	inside          // a pulse
	settling        // after a pulse: crossings now are its ringing
)

const (
	heightsKept = 8
	tooHigh     = 1.5 // times the usual height: a pulse with something on top of it
)

// detector finds pulses in the phase signal. It sees each sample once, in order, but looks back into the ring for the
// edge when the pulse is known.
type detector struct {
	cfg    *Config
	ring   *ring
	holes  *spans
	survey *survey
	lev    levels
	have   bool // lev is known
	keep   int64
	settle int64   // samples after a pulse in which crossings are its ringing, not another pulse
	rise   int64   // samples in which a pulse reaches its top
	most   int64   // the longest that rise may be: how far back an edge is looked for
	listen float64 // 1, or less when pulses have failed to come: the fraction of the usual trigger level

	on, off float64 // z beyond which a pulse begins and under which it ends
	heights [heightsKept]float64
	nh      int // heights ever taken
	wasHigh bool

	state       int
	trig        int64 // first sample beyond on
	peakAt      int64
	peak        float64
	closing     int64 // sample at which the pulse is decided
	high        bool  // while settling: beyond on again
	bounced     bool
	qsum, qsq   float64 // of z at rest since the last mark
	qn          int64
	rest        float64 // mean z at rest; with fixed levels the resting level is not where z is 0
	edgesLost   int64   // pulses whose edge fell into lost samples
	sinceSearch int     // hops since the last search
}

func newDetector(cfg *Config, r *ring, holes *spans) *detector {
	fastest := cfg.Rate * 60 / cfg.MaxRPM
	d := &detector{cfg: cfg, ring: r, holes: holes, keep: int64(cfg.KeepSeconds * cfg.Rate), listen: 1,
		survey: newSurvey(max(4, int(fastest/8)), cfg.Rate*60/cfg.MinRPM)}
	if !cfg.Auto {
		d.lev = levels{sign: 1, base: cfg.Threshold, lead: true}
		if cfg.Edge == Falling {
			d.lev.sign = -1
		}
		d.have = true
	}
	d.slow()
	d.most = max(d.rise, int64(0.055*cfg.Rate*60/cfg.MinRPM))
	d.setLevels()
	return d
}

// slow sets the pulse times for a speed that is not known, by the shortest turn.
func (d *detector) slow() {
	turn := d.cfg.Rate * 60 / d.cfg.MaxRPM
	d.settle, d.rise = 2, max(4, int64(0.1*turn))
}

// speed sets the pulse times for an expected period.
func (d *detector) speed(period float64) {
	d.settle = min(max(2, int64(0.002*period)), d.most)
	d.rise = min(max(4, int64(0.05*period)), d.most)
}

// height gives the usual pulse height, 0 when not known.
func (d *detector) height() float64 {
	n := min(d.nh, heightsKept)
	if n == 0 {
		return d.lev.height
	}
	var h [heightsKept]float64
	copy(h[:], d.heights[:n])
	return medianOf(h[:n])
}

// took tells the detector that a pulse was a mark. A low one that was heard only because the trigger level had been
// lowered is the new usual height: the signal has faded. Two high ones in a row are, too: it has come back.
func (d *detector) took(p pulse) {
	high := p.height > tooHigh*d.height()
	if d.listen < 1 && p.height < d.height()/2 || high && d.wasHigh {
		d.nh = 0
	}
	d.wasHigh = high
	d.heights[d.nh%heightsKept] = p.height
	d.nh++
	d.listen = 1
	if d.qn >= 8 {
		m := d.qsum / float64(d.qn)
		d.lev.noise = math.Sqrt(max(0, d.qsq/float64(d.qn)-m*m))
		if d.cfg.Auto {
			d.lev.base += m * d.lev.sign
		} else {
			d.rest = m
		}
	}
	d.qsum, d.qsq, d.qn = 0, 0, 0
	if d.nh > 1<<20 { // the count only has to say how many of the eight are set
		d.nh -= 1 << 19
	}
	d.setLevels()
}

// lower makes the detector listen for lower pulses because expected ones did not come.
func (d *detector) lower() {
	d.listen = 0.4
	d.setLevels()
}

func (d *detector) setLevels() {
	h := d.height()
	if !d.cfg.Auto {
		d.on, d.off = 0, -d.cfg.Hysteresis
		if d.cfg.Hysteresis == 0 {
			d.off = -h / 4
		}
		return
	}
	d.on = max(h/4*d.listen, min(6*d.lev.noise, h/2))
	d.off = d.on / 2
	if d.cfg.Hysteresis > 0 {
		d.off = min(max(d.on-d.cfg.Hysteresis, d.on/8), d.on*7/8)
	}
}

// unlock goes back to not knowing the speed. What is known of the pulses stays until the survey finds otherwise.
func (d *detector) unlock() {
	d.listen = 1
	d.slow()
	d.survey.restart()
	d.setLevels()
}

// restart begins anew after samples were lost for long.
func (d *detector) restart() {
	d.unlock()
	d.state = waiting
	d.qsum, d.qsq, d.qn = 0, 0, 0
}

const searchEvery = 24 // hops, three of the shortest turns; when there are many to look through, a sixteenth of them

// search looks for the levels if it is time; called at each full hop while the speed is not known.
func (d *detector) search() {
	if d.sinceSearch++; d.sinceSearch < max(searchEvery, d.survey.held()/16) {
		return
	}
	d.sinceSearch = 0
	l, ok := d.survey.find(d.cfg.Edge)
	if !ok {
		return
	}
	if known := d.lev; d.have {
		if known.height = d.height(); known.same(l) {
			return
		}
	}
	d.lev, d.have, d.nh, d.state = l, true, 0, waiting
	d.setLevels()
}

func (d *detector) z(j int64) float64 {
	return d.lev.sign * (float64(d.ring.code(d.cfg.Channel, j)) - d.lev.base)
}

// step takes sample j and gives the pulse that it decides, if any.
func (d *detector) step(j int64, locked bool) (pulse, bool) {
	v := d.ring.code(d.cfg.Channel, j)
	if d.cfg.Auto && d.survey.add(v) && !locked {
		d.search()
	}
	if !d.have {
		return pulse{}, false
	}
	z := d.lev.sign * (float64(v) - d.lev.base)
	if d.cfg.Auto && math.Abs(z) < d.on || !d.cfg.Auto && z < d.off {
		d.qsum += z
		d.qsq += z * z
		d.qn++
	}
	switch d.state {
	case waiting:
		if z < d.off {
			d.state = ready
		}
	case ready:
		if z >= d.on {
			d.state, d.trig, d.peakAt, d.peak, d.bounced = inside, j, j, z, false
			d.closing = j + d.rise
		}
	case inside:
		if z > d.peak {
			d.peak, d.peakAt = z, j
		}
		switch {
		case z < d.off:
			d.state, d.high = settling, false
			d.closing = j + d.settle
		case d.lev.lead && j >= d.closing:
			d.state = waiting
			return d.decide()
		case j-d.trig > d.keep/2: // stuck, not a pulse
			d.state = waiting
		}
	case settling:
		if z >= d.on {
			d.high, d.bounced = true, true
		} else if z < d.off {
			d.high = false
		}
		if j >= d.closing {
			if d.state = ready; d.high {
				d.state = waiting
			}
			return d.decide()
		}
	}
	return pulse{}, false
}

// finish decides a pulse that the end of the stream cut short; not ok when there is none or its height cannot be told.
func (d *detector) finish() (pulse, bool) {
	s := d.state
	d.state = waiting
	if s == settling || s == inside && d.lev.lead && d.nh > 0 && d.peak-d.rest > 0.75*d.height() {
		return d.decide()
	}
	return pulse{}, false
}

// decide finds the mark of the pulse that has ended. Not ok: its edge lies in lost samples.
func (d *detector) decide() (pulse, bool) {
	rest := d.rest
	if !d.cfg.Auto && d.nh == 0 && d.qn > 0 { // before the first mark
		rest = d.qsum / float64(d.qn)
	}
	p := pulse{height: d.peak - rest, bounced: d.bounced}
	level := 0.0
	if d.cfg.Auto {
		// Half the pulse's own height, but a spike on top of it does not count in full.
		level = d.peak / 2
		if h := d.height(); h > 0 {
			level = min(level, tooHigh*h/2)
		}
	}
	last := d.ring.end() - 1
	var j int64 // first sample beyond the edge
	if d.lev.lead {
		j = d.trig
		if d.z(j) >= level {
			for j > d.ring.first && j > d.trig-d.rise && d.z(j-1) >= level {
				j--
			}
		} else {
			for j < last && d.z(j) < level {
				j++
			}
		}
	} else {
		for j = d.peakAt + 1; j < last && d.z(j) >= level; j++ {
		}
	}
	if j <= d.ring.first {
		d.edgesLost++
		return pulse{}, false
	}
	if d.holes.meet(j-1, j+1) {
		d.edgesLost++
		return pulse{}, false
	}
	a, b := d.z(j-1), d.z(j)
	f := 1.0
	if a != b {
		f = min(max((level-a)/(b-a), 0), 1)
	}
	p.pos = float64(j-1) + f
	return p, true
}

// needs gives the oldest sample that the detector may still look at.
func (d *detector) needs(j int64) int64 {
	if d.state == inside || d.state == settling {
		j = d.trig
	}
	return j - d.most - 3
}
