package model

import (
	"math"

	"lapwing/internal/skid"
)

// thermometerLag is the first-order lag of the discharge thermometer in its well, s.
const thermometerLag = 12

// warm moves thermometers and covers by one slow interval.
func (t *throw) warm(m *Machine) {
	dt := slowEvery * m.dt
	t.discharge += (t.stage.gas.shown(t.stage.ts, t.dischT) - t.discharge) * math.Min(1, dt/thermometerLag)
	flow := t.stage.ps / (t.stage.gas.R * t.stage.ts) * m.omega / (2 * math.Pi)
	for _, e := range t.ends {
		if e == nil {
			continue
		}
		for _, g := range []*group{&e.suction, &e.disch} {
			// What one valve of the group passes when all is well, kg/s; 0.7 stands for the volumetric efficiency.
			share := 0.7 * flow * e.swept / float64(len(g.plates))
			for i := range g.plates {
				q := &g.plates[i]
				q.warm(t, share, dt, m.par.CoverLag)
			}
		}
	}
}

// warm moves the valve's cover towards its target: near suction temperature over suction valves, a little under discharge
// temperature over discharge valves; and up with the share of gas that goes back and forth through the leak. The
// saturation at a leak of a few per cent of throughput is a plausible shape, not a measured one.
func (q *plate) warm(t *throw, share, dt, lag float64) {
	target := t.stage.ts + 0.12*(t.discharge-t.stage.ts)
	hot := 0.7 * (t.discharge - t.stage.ts)
	if q.discharge {
		target = t.discharge - 0.12*(t.discharge-t.stage.ts)
		hot = 0.5 * (t.discharge - t.stage.ts)
	}
	g := 0.0
	if share > 0 { // a machine that stands passes nothing to compare with
		g = math.Max(q.leaked, 0) / dt / share
	}
	q.leaked = 0
	target += hot * g / (g + 0.06)
	// Small steady differences between covers: a few tenths of a kelvin by position.
	target += 0.4 * math.Sin(float64(3+5*q.index))
	if !q.coverSet {
		// Covers start warm: at their healthy temperature.
		q.cover, q.coverSet = target-hot*g/(g+0.06), true
	}
	q.cover += (target - q.cover) * math.Min(1, dt/lag)
}

// shown turns the temperature of the model's ideal gas into what a thermometer would show in the real one: the
// temperature exponent instead of the volume exponent, on the same compression.
func (g *Gas) shown(ts, t float64) float64 {
	if g.KT == 0 || g.KT == g.K || t <= 0 {
		return t
	}
	return ts * math.Pow(t/ts, (g.KT-1)/g.KT*g.K/(g.K-1))
}

// process reads the process values as a control system would: slow, with a little noise.
func (m *Machine) process() skid.Process {
	p := skid.Process{Step: m.step, Known: true, Covers: map[string]float64{}}
	noisy := func(v, rel float64) float64 { return v * (1 + rel*m.par.Noise*m.procNoise.NormFloat64()) }
	for i, s := range m.stages {
		l := skid.Line{Ps: noisy(s.ps, 0.0005), Pd: noisy(s.pd, 0.0005), Ts: noisy(s.ts, 0.0002), Td: math.NaN()}
		// The stage's discharge thermometer sits in the common line: the mean of its throws.
		sum, n := 0.0, 0
		for _, t := range m.throws {
			if t.sk.Stage == i+1 {
				sum += t.discharge
				n++
			}
		}
		if n > 0 {
			l.Td = noisy(sum/float64(n), 0.0002)
		}
		p.Stages = append(p.Stages, l)
	}
	for _, t := range m.throws {
		for _, e := range t.ends {
			if e == nil {
				continue
			}
			for _, g := range []*group{&e.suction, &e.disch} {
				for i := range g.plates {
					if q := &g.plates[i]; q.measured {
						p.Covers[q.id] = noisy(q.cover, 0.0003)
					}
				}
			}
		}
	}
	return p
}
