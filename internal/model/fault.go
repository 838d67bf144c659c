package model

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"

	"lapwing/internal/acq"
	"lapwing/internal/skid"
)

// How a missing piece shows: one third of the element gone and the rest is as weak as a badly broken plate; loose
// pieces knock about for some milliseconds after every blow. Plausible sizes, not measured ones.
const (
	missingWeakens = 3.0
	rattleFor      = 9e-3 // s
	rattleMost     = 4    // knocks after a blow
)

// Standing values of the instrument faults.
const (
	mainsHz   = 50.0
	openHum   = 0.02  // of full scale, at an open input
	openNoise = 1e-4  // of full scale, rms
	feedLoss  = 0.05  // of suction pressure: what the feed line costs when nothing is recycled
	coolLeft  = 0.35  // of the rise to discharge temperature is left in recycled gas behind its cooler
	fullShare = 0.999 // a clip level above this is none
)

// more is the later part of a plan: tracks by name, and of the whole machine.
type more struct {
	missing, gummed, springs    map[string]*track // by valve
	pocket, late                map[string]*track // by end
	recycle                     map[string]*track // by stage
	gain, clip, open, flat      map[string]*track // by channel
	hum, noisy                  map[string]*track // by channel
	slip, extra, missed, frozen track
	heat, exponent, weight      track // of the whole machine
	swaps                       []*swapPlan
}

type swapPlan struct {
	a, b string
	track
}

func newMore(sk *skid.Skid, lines []skid.Line) more {
	p := more{heat: track{base: 1}, weight: track{base: 1}, missing: map[string]*track{}, gummed: map[string]*track{}, springs: map[string]*track{}, pocket: map[string]*track{},
		late: map[string]*track{}, recycle: map[string]*track{}, gain: map[string]*track{}, clip: map[string]*track{},
		open: map[string]*track{}, flat: map[string]*track{}, hum: map[string]*track{}, noisy: map[string]*track{}}
	for i := range lines {
		p.recycle[fmt.Sprint(i+1)] = &track{}
	}
	for i := range sk.Throws {
		for side, e := range sk.Throws[i].Ends {
			if !e.Works {
				continue
			}
			name := endName(&sk.Throws[i], side)
			p.pocket[name], p.late[name] = &track{}, &track{}
			for _, v := range append(append([]skid.Valve{}, e.Suction...), e.Discharge...) {
				p.missing[v.ID], p.gummed[v.ID], p.springs[v.ID] = &track{}, &track{}, &track{base: 1}
			}
		}
	}
	for _, c := range sk.Channels {
		if c.Kind == skid.Pressure {
			p.gain[c.ID] = &track{base: 1}
		}
		p.clip[c.ID], p.open[c.ID], p.flat[c.ID] = &track{base: 1}, &track{}, &track{}
		p.hum[c.ID], p.noisy[c.ID] = &track{}, &track{}
	}
	return p
}

func endName(t *skid.Throw, side int) string { return t.ID + [2]string{".he", ".ce"}[side] }

// byName gives the tracks of a quantity that has one per valve, end, stage or channel; nil for any other.
func (p *more) byName(w What) map[string]*track {
	switch w {
	case Missing:
		return p.missing
	case Gummed:
		return p.gummed
	case Springs:
		return p.springs
	case Pocket:
		return p.pocket
	case LateClosing:
		return p.late
	case Recycle:
		return p.recycle
	case PressureGain:
		return p.gain
	case Clip:
		return p.clip
	case OpenCircuit:
		return p.open
	case Flat:
		return p.flat
	case Hum:
		return p.hum
	case Noisy:
		return p.noisy
	}
	return nil
}

// single gives the track of a quantity of the whole machine; nil for any other.
func (p *more) single(w What) *track {
	switch w {
	case PhaseSlip:
		return &p.slip
	case ExtraPulses:
		return &p.extra
	case MissedPulses:
		return &p.missed
	case FrozenProcess:
		return &p.frozen
	case WallHeat:
		return &p.heat
	case GasExponent:
		return &p.exponent
	case GasWeight:
		return &p.weight
	}
	return nil
}

// permitted refuses what no machine can do.
func permitted(c Change) error {
	lo, hi := 0.0, 1.0
	switch c.What {
	case Springs:
		lo, hi = 0.05, 20
	case Gummed, Pocket:
		hi = 2
	case LateClosing:
		lo, hi = -170, 170
	case Recycle:
		hi = 0.9
	case PressureGain:
		hi = 10
	case Clip:
		lo = 0.001
	case PhaseSlip:
		lo, hi = -180, 180
	case WallHeat:
		hi = 10
	case GasExponent:
		lo, hi = -0.2, 0.2
	case GasWeight:
		lo, hi = 0.3, 3
	}
	if c.To < lo || c.To > hi {
		return fmt.Errorf("%g is outside %g to %g", c.To, lo, hi)
	}
	return nil
}

// swap adds an exchange of two channels' cables.
func (p *plan) swap(c Change) error {
	ids := strings.Fields(c.Where)
	if len(ids) != 2 || p.clip[ids[0]] == nil || p.clip[ids[1]] == nil || ids[0] == ids[1] {
		return fmt.Errorf("an exchange wants two channels of the skid with a blank between, got %q", c.Where)
	}
	for _, s := range p.swaps {
		if s.a == ids[0] && s.b == ids[1] {
			s.moves = append(s.moves, c)
			return nil
		}
	}
	p.swaps = append(p.swaps, &swapPlan{a: ids[0], b: ids[1], track: track{moves: []Change{c}}})
	return nil
}

// fail follows the scripted state of a valve's mechanics.
func (q *plate) fail(m *Machine, now float64) {
	b, miss := min(m.plan.broken[q.id].at(now), 1), m.plan.missing[q.id].at(now)
	springs := m.plan.springs[q.id].at(now)
	q.grip = m.plan.gummed[q.id].at(now)
	if b != q.broken || miss != q.missing || springs != q.springs {
		q.broken, q.missing, q.springs = b, miss, springs
		q.refresh()
	}
	q.leak += miss * q.healthy.FlowArea
}

// controls follows pockets and late closing that move without a change of load step.
func (t *throw) controls(m *Machine, now float64) {
	for _, e := range t.ends {
		if e == nil {
			continue
		}
		if add := m.plan.pocket[e.name].at(now); add != e.addPocket {
			e.addPocket = add
			e.pocket(e.stepPocket+add, false)
		}
		e.addLate = m.plan.late[e.name].at(now)
		e.late = max(0, e.stepLate+e.addLate)
	}
}

// rattle is what loose pieces do after a blow: up to four small knocks within some milliseconds, felt by all
// accelerometers of the throw.
func (t *throw) rattle(m *Machine, q *plate, h hit, at float64) {
	for range m.loose.IntN(rattleMost + 1) {
		late := (0.1 + 0.9*m.loose.Float64()) * rattleFor * m.rate
		size := (0.08 + 0.3*m.loose.Float64()) * min(1, 0.4+missingWeakens*q.missing)
		for _, s := range t.accels {
			b := &s.bells[q.index]
			a := b.peak * h.speed / refSpeed * size
			for _, c := range contactShape {
				s.blows = append(s.blows, blow{due: at + late + b.delay + c.at*contact*s.rate, amp: a * c.share, valve: q.index})
			}
		}
	}
}

// recycled is a stage's line as the script gives it, with what recycled gas does to it: it comes back warm, and the
// feed line, which then passes less, loses less pressure.
func (m *Machine) recycled(i int, t float64) skid.Line {
	l := m.plan.line(i, t)
	r := m.plan.recycle[fmt.Sprint(i+1)].at(t)
	if r <= 0 {
		return l
	}
	td, n := 0.0, 0.0
	for _, th := range m.throws {
		if th.stage == m.stages[i] {
			td += th.discharge
			n++
		}
	}
	if n > 0 {
		l.Ts += r * coolLeft * (td/n - l.Ts)
	}
	l.Ps *= 1 + feedLoss*(1-(1-r)*(1-r))
	return l
}

// reading is what the operator's system has at t.
func (m *Machine) reading(t float64) skid.Process {
	if m.plan.frozen.at(t) > 0.5 && len(m.history) > 0 {
		return m.history[len(m.history)-1]
	}
	return m.process()
}

// spoil is the present state of a channel's scripted faults.
type spoil struct {
	gain, clip, hum, noisy float64
	open, flat, any        bool
	last                   float64 // code given last
}

var healthy = spoil{gain: 1, clip: 1}

func (s *spoil) slow(m *Machine, id string, now float64) {
	if tr := m.plan.gain[id]; tr != nil {
		s.gain = tr.at(now)
	}
	s.clip, s.hum, s.noisy = m.plan.clip[id].at(now), m.plan.hum[id].at(now), m.plan.noisy[id].at(now)
	s.open, s.flat = m.plan.open[id].at(now) > 0.5, m.plan.flat[id].at(now) > 0.5 && m.n > 0
	s.any = s.open || s.clip < fullShare || s.hum > 0 || s.noisy > 0
}

// wire is what the converter gets of x, both in counts.
func (s *spoil) wire(x float64, c *channel, m *Machine) float64 {
	hum := s.hum
	if s.open {
		x, hum = openNoise*c.top*c.rnd.NormFloat64(), max(hum, openHum)
	}
	if hum > 0 {
		x += hum * c.top * math.Sin(2*math.Pi*mainsHz*float64(m.n)*m.dt)
	}
	if s.noisy > 0 {
		x += s.noisy * c.top * c.rnd.NormFloat64()
	}
	return max(-s.clip*c.top, min(s.clip*c.top, x))
}

// exchange is two inputs that may have each other's cable.
type exchange struct {
	a, b  int     // inputs
	scale float64 // counts at b of a count at a
	top   float64
	on    bool
	track *track
}

func (m *Machine) wireSwaps() {
	for _, s := range m.plan.swaps {
		var a, b skid.Channel
		for _, c := range m.sk.Channels {
			switch c.ID {
			case s.a:
				a = c
			case s.b:
				b = c
			}
		}
		m.swaps = append(m.swaps, exchange{a: a.Input, b: b.Input, scale: a.VoltsFull / b.VoltsFull,
			top: float64(int64(1)<<(m.bits-1)) - 1, track: &s.track})
	}
}

func (x *exchange) apply(b *acq.Block, i int) {
	if !x.on {
		return
	}
	va, vb := float64(b.Counts[x.a][i]), float64(b.Counts[x.b][i])
	fit := func(v float64) int32 { return int32(max(-x.top-1, min(x.top, math.RoundToEven(v)))) }
	b.Counts[x.a][i], b.Counts[x.b][i] = fit(vb/x.scale), fit(va*x.scale)
}

// marks is the present state of the shaft reference's scripted faults.
type marks struct {
	slip          float64 // degrees
	often, seldom float64 // share of turns with an extra pulse, and without the mark
	extra, miss   bool    // this turn
	at            float64 // degrees, of the extra pulse
	half          bool    // which half of the turn was seen last
}

func (k *marks) slow(m *Machine, now float64) {
	k.slip, k.often, k.seldom = m.plan.slip.at(now), m.plan.extra.at(now), m.plan.missed.at(now)
}

// draw decides at half a turn what the next mark does, and after it whether a pulse is added before the next half turn.
func (k *marks) draw(a float64, r *rand.Rand) {
	half := a >= 180
	if half == k.half {
		return
	}
	k.half = half
	k.extra = false
	if half {
		k.miss = k.seldom > 0 && r.Float64() < k.seldom
	} else if k.often > 0 && r.Float64() < k.often {
		k.extra, k.at = true, 20+120*r.Float64()
	}
}
