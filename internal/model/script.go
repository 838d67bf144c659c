package model

import (
	"fmt"
	"math"
	"sort"
	"strconv"

	"lapwing/internal/skid"
)

// What names a quantity that a script can change.
type What int

// The quantities, with what Where names and the unit of To. An empty Where means all of the kind.
const (
	SuctionPressure   What = iota // stage ("1"); Pa absolute
	DischargePressure             // stage; Pa absolute
	SuctionTemp                   // stage; K
	Speed                         // none; rev/min; 0: it stands
	LoadStep                      // none; load-step code; takes effect at once
	ValveLeak                     // valve id; m² of effective leak area on top of the healthy one
	RingLeak                      // throw id; m², likewise
	PackingLeak                   // throw id; m², likewise
	Broken                        // valve id; 0 whole .. 1 badly broken plate
	Sticky                        // valve id; adhesion as a share of line pressure on top of the healthy one
	AccelGain                     // channel id; factor on the accelerometer, 0: dead
	PressureZero                  // channel id; Pa added to what the transmitter shows

	Missing       // valve id; share of the sealing element that has broken away, 0..1: a hole, harder blows, a rattle
	Gummed        // valve id; adhesion of the plate to its stop, share of line pressure (0.01 is much): closes late, sits hard
	Springs       // valve id; factor on its spring forces: below 1 weak (late closing), above 2 too stiff (flutter)
	Pocket        // end ("t1.he"); clearance added to that of the load step, share of the end's swept volume
	LateClosing   // end; degrees added to the load step's late suction closing
	Recycle       // stage; share of the delivered gas that comes back to suction
	PressureGain  // channel id; factor on what the transmitter shows
	Clip          // channel id; share of the converter's full scale at which the signal is cut off; 1: not
	OpenCircuit   // channel id; 1: the cable is open, the input hears mains; 0: mended
	Flat          // channel id; 1: the converter repeats its last code; 0: mended
	Hum           // channel id; mains added to the signal, amplitude as a share of full scale
	Noisy         // channel id; noise added to the signal, rms as a share of full scale
	Swapped       // two channel ids with a blank between: 1: their cables are exchanged; 0: as they should be
	PhaseSlip     // none; degrees by which the marks come later than the skid says
	ExtraPulses   // none; share of turns with a pulse where none belongs
	MissedPulses  // none; share of turns whose mark is missing
	FrozenProcess // none; 1: the process values stay what they were; 0: they move again
	WallHeat      // none; factor on the heat that walls and gas exchange
	GasExponent   // none; added to both isentropic exponents: another gas than the skid says
	GasWeight     // none; factor on the gas's molar mass
)

// MM2 is a square millimetre in m².
const MM2 = 1e-6

// Change moves one quantity from what it is at At to To, linearly over Over seconds (0: at once).
type Change struct {
	At, Over float64 // s from the first sample
	What     What
	Where    string
	To       float64
}

// Drift is a slow sine on speed and lines: amplitudes as shares (Ts in K), one period for all, phases apart.
type Drift struct {
	Ps, Pd, Speed float64
	Ts            float64 // K
	Period        float64 // s; 0: no drift
}

// Script says where a run starts and what happens in it. The zero Script runs the skid's process values at rated speed
// on its first load step.
type Script struct {
	Lines   []skid.Line // line pressures and suction temperatures by stage; nil: the skid's process values
	RPM     float64     // 0: rated
	Step    int         // load-step code at the start
	Drift   Drift
	Changes []Change
}

// Add appends a change and returns the script, so that scripts can be written as a chain.
func (s Script) Add(at, over float64, what What, where string, to float64) Script {
	s.Changes = append(s.Changes[:len(s.Changes):len(s.Changes)], Change{at, over, what, where, to})
	return s
}

// track is one quantity over time.
type track struct {
	base  float64
	moves []Change // by At
}

func (tr *track) at(t float64) float64 {
	v := tr.base
	for i, c := range tr.moves {
		if t < c.At {
			break
		}
		end := t
		if i+1 < len(tr.moves) && tr.moves[i+1].At < t {
			end = tr.moves[i+1].At // a later change starts from wherever this one has got to
		}
		if c.Over <= 0 || end >= c.At+c.Over {
			v = c.To
		} else {
			v += (c.To - v) * (end - c.At) / c.Over
		}
	}
	return v
}

// plan is a script resolved against a skid.
type plan struct {
	speed, step   track
	ps, pd, ts    []track
	drift         Drift
	valveLeak     map[string]*track
	broken        map[string]*track
	sticky        map[string]*track
	ring, packing map[string]*track
	accelGain     map[string]*track
	zero          map[string]*track
	more
}

func newPlan(sk *skid.Skid, s Script, par Params) (plan, error) {
	p := plan{drift: s.Drift, valveLeak: map[string]*track{}, broken: map[string]*track{}, sticky: map[string]*track{},
		ring: map[string]*track{}, packing: map[string]*track{}, accelGain: map[string]*track{}, zero: map[string]*track{}}
	rpm := s.RPM
	if rpm == 0 {
		rpm = sk.Machine.RatedRPM
	}
	p.speed.base = rpm
	p.step.base = float64(s.Step)
	lines := s.Lines
	if lines == nil {
		lines = sk.Process.Stages
	}
	for i, l := range lines {
		if !(l.Ps > 0 && l.Pd > 0 && l.Ts > 0) {
			return p, fmt.Errorf("model: stage %d: suction %g Pa, discharge %g Pa, suction %g K: all three must be known and positive",
				i+1, l.Ps, l.Pd, l.Ts)
		}
		p.ps = append(p.ps, track{base: l.Ps})
		p.pd = append(p.pd, track{base: l.Pd})
		p.ts = append(p.ts, track{base: l.Ts})
	}
	for i := range sk.Throws {
		t := &sk.Throws[i]
		if t.Stage < 1 || t.Stage > len(lines) {
			return p, fmt.Errorf("model: throw %s is on stage %d, and there are line pressures for %d", t.ID, t.Stage, len(lines))
		}
		p.ring[t.ID], p.packing[t.ID] = &track{base: par.Ring}, &track{base: par.Packing}
		for _, e := range t.Ends {
			if !e.Works {
				continue
			}
			for _, v := range append(append([]skid.Valve{}, e.Suction...), e.Discharge...) {
				d, ok := par.Valves[v.ID]
				if !ok || !(d.FlowArea > 0 && d.ForceArea > 0 && d.Lift > 0 && d.Mass > 0) {
					return p, fmt.Errorf("model: valve %s has no data", v.ID)
				}
				p.valveLeak[v.ID] = &track{base: d.BaseLeak}
				p.sticky[v.ID] = &track{base: d.Adhesion}
				p.broken[v.ID] = &track{}
			}
		}
	}
	for _, c := range sk.Channels {
		switch c.Kind {
		case skid.Acceleration:
			p.accelGain[c.ID] = &track{base: 1}
		case skid.Pressure:
			p.zero[c.ID] = &track{}
		}
	}
	p.more = newMore(sk, lines)
	changes := append([]Change{}, s.Changes...)
	sort.SliceStable(changes, func(i, j int) bool { return changes[i].At < changes[j].At })
	for _, c := range changes {
		if err := p.put(sk, c); err != nil {
			return p, fmt.Errorf("model: script at %g s: %w", c.At, err)
		}
	}
	return p, nil
}

// put adds a change to its tracks.
func (p *plan) put(sk *skid.Skid, c Change) error {
	if math.IsNaN(c.To) || math.IsInf(c.To, 0) || math.IsNaN(c.At) || c.Over < 0 {
		return fmt.Errorf("a change must have a finite value and time, got %+v", c)
	}
	stage := func(ts []track) error {
		if c.To <= 0 {
			return fmt.Errorf("a line value must be positive, got %g", c.To)
		}
		if c.Where == "" {
			for i := range ts {
				ts[i].moves = append(ts[i].moves, c)
			}
			return nil
		}
		i, err := strconv.Atoi(c.Where)
		if err != nil || i < 1 || i > len(ts) {
			return fmt.Errorf("stage %q is not one of 1 to %d", c.Where, len(ts))
		}
		ts[i-1].moves = append(ts[i-1].moves, c)
		return nil
	}
	// named adds the change; above is what a healthy machine already has and To comes on top of.
	named := func(m map[string]*track, onTop bool) error {
		if c.To < 0 && c.What != PressureZero {
			return fmt.Errorf("a fault cannot be negative, got %g", c.To)
		}
		if c.Where != "" && m[c.Where] == nil {
			return fmt.Errorf("the skid has no %q that could change so", c.Where)
		}
		for id, tr := range m { // order does not matter: each track gets its own copy
			if c.Where == "" || c.Where == id {
				d := c
				if onTop {
					d.To += tr.base
				}
				tr.moves = append(tr.moves, d)
			}
		}
		return nil
	}
	switch c.What {
	case SuctionPressure:
		return stage(p.ps)
	case DischargePressure:
		return stage(p.pd)
	case SuctionTemp:
		return stage(p.ts)
	case Speed:
		if c.To < 0 {
			return fmt.Errorf("speed must not be negative, got %g rev/min", c.To)
		}
		p.speed.moves = append(p.speed.moves, c)
		return nil
	case LoadStep:
		for _, s := range sk.Steps {
			if float64(s.Code) == c.To {
				c.Over = 0
				p.step.moves = append(p.step.moves, c)
				return nil
			}
		}
		return fmt.Errorf("the skid has no load step %g", c.To)
	case ValveLeak:
		return named(p.valveLeak, true)
	case RingLeak:
		return named(p.ring, true)
	case PackingLeak:
		return named(p.packing, true)
	case Broken:
		return named(p.broken, false)
	case Sticky:
		return named(p.sticky, true)
	case AccelGain:
		return named(p.accelGain, false)
	case PressureZero:
		return named(p.zero, false)
	case Swapped:
		return p.swap(c)
	}
	if m := p.byName(c.What); m != nil {
		if err := permitted(c); err != nil {
			return err
		}
		return named(m, false)
	}
	if tr := p.single(c.What); tr != nil {
		if c.Where != "" {
			return fmt.Errorf("this concerns the whole machine, not %q", c.Where)
		}
		if err := permitted(c); err != nil {
			return err
		}
		tr.moves = append(tr.moves, c)
		return nil
	}
	return fmt.Errorf("unknown quantity %d", c.What)
}

// wave is the drift's sine, with a phase of its own for each quantity.
func (p *plan) wave(t, phase float64) float64 {
	if p.drift.Period <= 0 {
		return 0
	}
	return math.Sin(2*math.Pi*t/p.drift.Period + phase)
}

func (p *plan) speedAt(t float64) float64 { return p.speed.at(t) * (1 + p.drift.Speed*p.wave(t, 0)) }

func (p *plan) line(stage int, t float64) skid.Line {
	return skid.Line{
		Ps: p.ps[stage].at(t) * (1 + p.drift.Ps*p.wave(t, 1)),
		Pd: p.pd[stage].at(t) * (1 + p.drift.Pd*p.wave(t, 2.3)),
		Ts: p.ts[stage].at(t) + p.drift.Ts*p.wave(t, 4),
	}
}
