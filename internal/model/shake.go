package model

import (
	"math"
	"math/rand/v2"

	"lapwing/internal/crank"
)

// Levels of the vibration model. They are of the size the trade reports (valve events 10 to 100 m/s² peak at the
// cylinder, leak hiss well below); a real mounting would need its own.
const (
	refSpeed   = 4.0  // m/s, stop impact that gives a valve's reference peak
	hissRef    = 0.45 // m/s² rms in the leak band from a jet of one per cent of a throw's throughput at a fully choked ratio
	flowShare  = 0.08 // acoustic efficiency of open-valve flow against a leak jet
	floorWhite = 0.2  // m/s² rms, accelerometer and cable, whole band
	floorWork  = 0.5  // m/s² rms at rated speed, running gear, falling above about 2 kHz
	shaftOrder = 3.0  // m/s², first shaft order at rated speed
	crossShare = 0.06 // of the other throws' impacts
	crossDelay = 1.1e-3
	contact    = 90e-6 // s, length of a contact
)

// mode is one structural mode as a turning and shrinking pointer; its output is the imaginary part.
type mode struct {
	re, im     float64
	cr, ci     float64 // pointer's step per sample
	decay, w   float64 // 1/s, rad/s
	stop, seat float64 // amplitude per unit impact at stop and at seat
}

// bell is one valve's way to one accelerometer: its own modes, peak level and delay.
type bell struct {
	modes []mode
	peak  float64 // m/s² for a stop impact at refSpeed with the healthy mass
	delay float64 // samples
	jet   float64 // coupling of leak noise
	left  int     // samples until the modes have died
}

// blow is an impulse on its way.
type blow struct {
	due   float64 // sample position
	amp   float64 // m/s²
	valve int
	stop  bool
}

// shaker is one accelerometer: what it feels.
type shaker struct {
	id     string
	rate   float64
	bells  []bell
	blows  []blow
	long   int // samples a mode is followed
	rated  float64
	gain   float64
	out    float64   // m/s², at the present sample
	past   []float64 // its impacts, for the neighbours to hear later
	cross  []*shaker
	wait   int
	low    float64 // one-pole state of crosstalk
	lowA   float64
	rnd    *rand.Rand
	hiss   band
	rush   band
	rumble float64 // one-pole noise state
	jetRef float64 // 1/(kg/s·(m/s)²)
	noise  float64
}

func newShaker(m *Machine, t *throw, id string, seed, use uint64) *shaker {
	s := &shaker{id: id, rate: m.rate, gain: 1, rnd: stream(seed, use), noise: m.par.Noise}
	s.rated = m.sk.Machine.RatedRPM * math.Pi / 30
	make1 := stream(seed, use+4096) // the structure does not change with the run's scatter
	for _, e := range t.ends {
		if e == nil {
			continue
		}
		for range len(e.suction.plates) + len(e.disch.plates) {
			s.bells = append(s.bells, newBell(make1, m.rate))
		}
	}
	s.long = int(0.02 * m.rate)
	s.wait = int(crossDelay * m.rate)
	s.past = make([]float64, s.wait+1)
	s.lowA = 1 - math.Exp(-2*math.Pi*6000/m.rate)
	s.hiss = newBand(8000, 20000, m.rate)
	s.rush = newBand(900, 6000, m.rate)
	// One per cent of the throw's throughput at the ideal speed of a ratio of 2.5.
	swept := t.sk.Cylinder.Swept(crank.HE) + t.sk.Cylinder.Swept(crank.CE)
	flow := 0.7 * swept * t.stage.ps / (t.stage.gas.R * t.stage.ts) * s.rated / (2 * math.Pi)
	s.jetRef = 1 / (0.01 * flow * jetEnergy(&t.stage.gas, 2.5, 1, t.stage.ts*1.25))
	return s
}

// newBell draws a valve's modes: 4 to 6 between 2 and 15 kHz, ring-down 0.5 to 2 ms, shorter when higher.
func newBell(r *rand.Rand, rate float64) bell {
	n := 4 + r.IntN(3)
	b := bell{peak: 22 + 26*r.Float64(), delay: (0.05e-3 + 0.35e-3*r.Float64()) * rate, jet: 0.7 + 0.6*r.Float64()}
	for i := range n {
		f := 2000 * math.Pow(7.5, (float64(i)+r.Float64())/float64(n))
		f = min(f, 0.42*rate)
		tau := (0.6e-3 + 0.9e-3*r.Float64()) * math.Pow(f/4000, -0.5)
		mo := mode{decay: 1 / tau, w: 2 * math.Pi * f}
		g := math.Exp(-mo.decay / rate)
		mo.cr, mo.ci = g*math.Cos(mo.w/rate), g*math.Sin(mo.w/rate)
		mo.stop = 0.4 + r.Float64()
		mo.seat = 0.4 + r.Float64()
		b.modes = append(b.modes, mo)
	}
	// Scale both mixes so that a unit impact, contact length in, peaks at one.
	var stop, seat float64
	for t := 0.0; t < 1.2e-3; t += 10e-6 {
		var a, c float64
		for _, part := range contactShape {
			if tt := t - part.at*contact; tt > 0 {
				for _, mo := range b.modes {
					y := part.share * math.Exp(-mo.decay*tt) * math.Sin(mo.w*tt)
					a += mo.stop * y
					c += mo.seat * y
				}
			}
		}
		stop, seat = max(stop, math.Abs(a)), max(seat, math.Abs(c))
	}
	for i := range b.modes {
		b.modes[i].stop /= stop
		b.modes[i].seat /= seat
	}
	return b
}

// contactShape spreads a contact over its length: a short half-sine in three parts.
var contactShape = [3]struct{ at, share float64 }{{0, 0.25}, {0.5, 0.5}, {1, 0.25}}

// strike sends an impact to the throw's accelerometers; at is its sample position.
func (t *throw) strike(m *Machine, q *plate, h hit, at float64) {
	for _, s := range t.accels {
		b := &s.bells[q.index]
		// Acceleration goes with the plate's change of momentum; a broken or tilted plate hits harder than its mass says.
		bounce := q.d.Seat
		if h.stop {
			bounce = q.d.Stop
		}
		a := b.peak * h.speed / refSpeed * (q.d.Mass / q.healthy.Mass) * (1 + bounce) / 1.2
		a *= 1 + 1.6*max(q.broken, min(1, missingWeakens*q.missing))
		if sc := m.par.Scatter; sc > 0 {
			a *= math.Exp(0.1 * sc * s.rnd.NormFloat64())
		}
		if m.par.Mute[q.id] {
			continue
		}
		for _, c := range contactShape {
			s.blows = append(s.blows, blow{due: at + b.delay + c.at*contact*s.rate, amp: a * c.share, valve: q.index, stop: h.stop})
		}
	}
	if q.missing > 0 {
		t.rattle(m, q, h, at)
	}
}

// impacts gives the impact part at sample n.
func (s *shaker) impacts(n int64) float64 {
	now := float64(n)
	if len(s.blows) > 0 {
		keep := s.blows[:0]
		for _, b := range s.blows {
			if b.due > now {
				keep = append(keep, b)
				continue
			}
			bl := &s.bells[b.valve]
			bl.left = s.long
			dt := (now - b.due) / s.rate
			for i := range bl.modes {
				mo := &bl.modes[i]
				a := b.amp * mo.seat
				if b.stop {
					a = b.amp * mo.stop
				}
				a *= math.Exp(-mo.decay * dt)
				sn, cs := math.Sincos(mo.w * dt)
				mo.re += a * cs
				mo.im += a * sn
			}
		}
		s.blows = keep
	}
	y := 0.0
	for i := range s.bells {
		b := &s.bells[i]
		if b.left == 0 {
			continue
		}
		b.left--
		for j := range b.modes {
			mo := &b.modes[j]
			y += mo.im
			mo.re, mo.im = mo.re*mo.cr-mo.im*mo.ci, mo.re*mo.ci+mo.im*mo.cr
			if b.left == 0 {
				mo.re, mo.im = 0, 0
			}
		}
	}
	return y
}

// shake computes what the throw's accelerometers feel at the present sample.
func (t *throw) shake(m *Machine) {
	if len(t.accels) == 0 {
		return
	}
	n := m.n - 1
	for _, s := range t.accels {
		jet, open := 0.0, 0.0
		for _, e := range t.ends {
			if e == nil {
				continue
			}
			jet += 0.3 * e.packJet
			for _, g := range [2]*group{&e.suction, &e.disch} {
				for i := range g.plates {
					q := &g.plates[i]
					jet += q.jet * s.bells[q.index].jet
					open += q.open
				}
			}
			jet += e.ringJet
		}
		speed := m.omega / s.rated
		y := s.impacts(n)
		s.past[n%int64(len(s.past))] = y
		// Leak hiss and flow noise: band-limited noise whose power follows the jets over the turn.
		y += s.hiss.next(s.rnd.NormFloat64()) * hissRef * math.Sqrt(jet*s.jetRef)
		y += s.rush.next(s.rnd.NormFloat64()) * hissRef * math.Sqrt((jet+flowShare*open)*s.jetRef)
		if s.noise > 0 {
			s.rumble += (s.rnd.NormFloat64() - s.rumble) * 0.2
			y += s.noise * (floorWhite*s.rnd.NormFloat64() + 3*floorWork*speed*speed*s.rumble)
		}
		y += shaftOrder * speed * speed * (m.cosN[1] + 0.4*m.sinN[2] + 0.2*m.cosN[4])
		c := 0.0
		for _, o := range s.cross {
			c += o.past[(n+1)%int64(len(o.past))]
		}
		s.low += (c - s.low) * s.lowA
		s.out = (y + crossShare*s.low) * s.gain
	}
}

// slow follows the accelerometer's own faults.
func (s *shaker) slow(m *Machine, now float64) {
	if tr := m.plan.accelGain[s.id]; tr != nil {
		s.gain = tr.at(now)
	}
	if s.cross == nil {
		s.cross = []*shaker{}
		for _, t := range m.throws {
			if len(t.accels) > 0 && !t.has(s) {
				s.cross = append(s.cross, t.accels[0])
			}
		}
	}
}

func (t *throw) has(s *shaker) bool {
	for _, a := range t.accels {
		if a == s {
			return true
		}
	}
	return false
}
