package model

import (
	"fmt"
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// stage is the lines that the throws of one stage share: slow means, moved linearly between two looks at the script.
type stage struct {
	ps, pd, ts    float64
	dps, dpd, dts float64 // per sample

	gas, real     Gas // in the cylinders, and what the skid's gas is at the line
	noz           *nozzle
	line          skid.Line // for which gas was computed
	other, weight float64   // what the script makes of it
	mid           float64   // Pa, where the exponent is the mean one
}

func (s *stage) aim(l skid.Line) {
	s.dps, s.dpd, s.dts = (l.Ps-s.ps)/slowEvery, (l.Pd-s.pd)/slowEvery, (l.Ts-s.ts)/slowEvery
}

func (s *stage) move() {
	s.ps += s.dps
	s.pd += s.dpd
	s.ts += s.dts
}

func (m *Machine) buildStages(sk *skid.Skid) {
	if !m.par.SteadyGas {
		m.gases = newGasMap(sk)
	}
	if m.base = m.par.Duty; m.base.Ps == 0 {
		m.base = m.plan.line(0, 0)
	}
	for i := range m.plan.ps {
		l := m.plan.line(i, 0)
		st := &stage{ps: l.Ps, pd: l.Pd, ts: l.Ts, gas: m.par.Gas, real: m.par.Gas, noz: newNozzle(m.par.Gas.K)}
		st.gas.pr06 = math.Pow(m.par.Gas.Prandtl, 0.6)
		st.follow(m, l, 0)
		m.stages = append(m.stages, st)
	}
}

// throw is one cylinder with its two passages, between the lines and the valves.
type throw struct {
	index  int
	sk     *skid.Throw
	stage  *stage
	ends   [2]*end // nil: does not work
	atm    float64
	travel float64 // m, at the present sample
	before float64 // m, at the sample before it

	pulseS, pulseD []harmonic
	ps, pd         float64 // Pa, in the passages now, pulsation in
	// Passages are well mixed: hot gas that leaks back into the suction passage is drawn in again.
	suctionT, suctionRT float64 // K, √(R·T)
	dischT, dischRT     float64
	passage             float64 // m³, each
	perSuction          float64 // 1/(kg K): 1/(mass·temperature) of the suction passage
	perDisch            float64 // likewise
	discharge           float64 // K, what the discharge thermometer has got to (lagged)
	next                int64   // number of the next head-end dead centre
	pin                 pin

	accels []*shaker
}

func (m *Machine) buildThrows(seed uint64) error {
	for i := range m.sk.Throws {
		st := &m.sk.Throws[i]
		cyl := st.Cylinder
		t := &throw{index: i, sk: st, stage: m.stages[st.Stage-1], atm: m.sk.Machine.Atmosphere, pin: pin{x0: math.NaN(), x1: math.NaN()}}
		if t.atm == 0 {
			t.atm = 101325
		}
		t.passage = m.par.Passage * cyl.Swept(crank.HE)
		td := t.adiabatic()
		t.suctionT, t.dischT, t.discharge = t.stage.ts, td, td
		t.suctionRT, t.dischRT = math.Sqrt(t.stage.gas.R*t.suctionT), math.Sqrt(t.stage.gas.R*t.dischT)
		t.perSuction, t.perDisch = t.stage.gas.R/(t.stage.ps*t.passage), t.stage.gas.R/(t.stage.pd*t.passage)
		// Each throw hears its own pulsation: the phase moves with its dead centre.
		t.pulseS = pulses(m.par.SuctionPulse, st.DeadCentre)
		t.pulseD = pulses(m.par.DischargePulse, st.DeadCentre)
		for _, p := range append(append([]Pulsation{}, m.par.SuctionPulse...), m.par.DischargePulse...) {
			if p.Order < 1 || p.Order > maxOrder {
				return fmt.Errorf("model: pulsation order %d is outside 1 to %d", p.Order, maxOrder)
			}
		}
		count := 0
		for side := range t.ends {
			se := &st.Ends[side]
			if !se.Works {
				continue
			}
			if len(se.Suction) == 0 || len(se.Discharge) == 0 {
				return fmt.Errorf("model: throw %s: a working end needs suction and discharge valves", st.ID)
			}
			e := &end{name: st.ID + [2]string{".he", ".ce"}[side], side: side, area: cyl.Area(side), swept: cyl.Swept(side),
				clear0: cyl.ClearanceVolume(side), bore: cyl.Bore, gas: &t.stage.gas}
			e.vc = e.clear0
			e.diary = diary{throw: i, end: side}
			e.disch.discharge = true
			for _, v := range se.Suction {
				e.suction.plates = append(e.suction.plates, m.newPlate(v, count, false))
				count++
			}
			for _, v := range se.Discharge {
				e.disch.plates = append(e.disch.plates, m.newPlate(v, count, true))
				count++
			}
			t.ends[side] = e
		}
		m.throws = append(m.throws, t)
	}
	for i, t := range m.throws {
		for a, id := range t.sk.Accel {
			t.accels = append(t.accels, newShaker(m, t, id, seed, uint64(100+16*i+a)))
		}
	}
	return nil
}

func (m *Machine) newPlate(v skid.Valve, index int, discharge bool) plate {
	q := plate{id: v.ID, index: index, discharge: discharge, measured: v.Cover != "", healthy: m.par.Valves[v.ID], sticks: 1, springs: 1}
	// Two valves of a group never are quite alike.
	f := 1 + 0.02*m.par.Scatter*m.scatter.NormFloat64()
	q.healthy.Mass *= f
	q.healthy.Preload *= 1 + 0.03*m.par.Scatter*m.scatter.NormFloat64()
	q.refresh()
	q.leak, q.adhesion = q.healthy.BaseLeak, q.healthy.Adhesion
	return q
}

func pulses(ps []Pulsation, dc float64) []harmonic {
	var out []harmonic
	for _, p := range ps {
		ph := (p.Phase + float64(p.Order)*dc) * math.Pi / 180
		out = append(out, harmonic{p.Order, p.Amp * math.Cos(ph), p.Amp * math.Sin(ph)})
	}
	return out
}

func (t *throw) adiabatic() float64 {
	g := &t.stage.gas
	return t.stage.ts * math.Pow(math.Max(t.stage.pd/t.stage.ps, 1), (g.K-1)/g.K)
}

// place sets both ends on the ideal cycle at the starting angle.
func (t *throw) place(m *Machine) {
	deg := m.angle() - t.sk.DeadCentre
	t.next = int64(math.Floor(deg/360)) + 1
	t.travel = t.sk.Cylinder.Travel(deg)
	t.lines(m)
	for side, e := range t.ends {
		if e == nil {
			continue
		}
		e.v = e.volume(t.travel, t.sk.Cylinder.Stroke)
		own := math.Mod(deg+180*float64(side)+720, 360)
		k := t.stage.gas.K
		if own < 180 { // expanding from the discharge line
			e.p = max(t.ps, t.pd*math.Pow(e.vc/e.v, k))
		} else {
			e.p = min(t.pd, t.ps*math.Pow((e.vc+e.swept)/e.v, k))
		}
		if e.idle {
			e.p = t.ps
		}
		e.t = t.stage.ts * math.Pow(e.p/t.ps, (k-1)/k)
		e.m = e.p * e.v / (t.stage.gas.R * e.t)
		e.k = k
	}
}

// lines gives the pressures in the passages at the present angle.
func (t *throw) lines(m *Machine) {
	fs, fd := 1.0, 1.0
	for _, h := range t.pulseS {
		fs += h.a*m.cosN[h.order] + h.b*m.sinN[h.order]
	}
	for _, h := range t.pulseD {
		fd += h.a*m.cosN[h.order] + h.b*m.sinN[h.order]
	}
	t.ps, t.pd = t.stage.ps*fs, t.stage.pd*fd
}

// advance moves the throw by one interval; before is the shaft's angle at its beginning.
func (t *throw) advance(m *Machine, before, ddeg float64) {
	deg0 := before - t.sk.DeadCentre
	cyl := &t.sk.Cylinder
	x0 := t.travel
	x1 := cyl.Travel(deg0 + ddeg)
	// Half way, from the last three travels: exact but for the third derivative, some 10⁻¹¹ m.
	xm := 0.5*(x0+x1) - 0.125*(x1-2*x0+t.before)
	if m.n == 1 {
		xm = cyl.Travel(deg0 + 0.5*ddeg)
	}
	t.before = x0
	t.travel = x1
	t.pin.book(t, m.dt, x1, t.beside(crank.HE), t.beside(crank.CE))
	t.lines(m)
	if r := t.stage.gas.R; m.n%jetEvery == 0 {
		t.suctionRT, t.dischRT = math.Sqrt(r*t.suctionT), math.Sqrt(r*t.dischT)
		t.perSuction, t.perDisch = r/(t.ps*t.passage), r/(t.pd*t.passage)
	}
	t.rings(m)
	for _, e := range t.ends {
		if e == nil {
			continue
		}
		if m.n%heatEvery == 0 {
			e.heat(deg0, m.omega)
		}
		e.fingers(t.ps, deg0+ddeg)
		s := cyl.Stroke
		e.advance(m, t, e.volume(x0, s), e.volume(xm, s), e.volume(x1, s), deg0, ddeg)
	}
	if deg := deg0 + ddeg; deg >= float64(t.next)*360 {
		f := (float64(t.next)*360 - deg0) / ddeg
		at := (float64(m.n-1) + f) * m.dt
		rev := t.pin.turn()
		for _, e := range t.ends {
			if e != nil {
				e.diary.finish(at, e.m, e.idle, m.step, rev)
				if t.next >= 0 {
					e.diary.begin(t.next, at, e.m)
				}
			}
		}
		t.next++
	}
	if m.n%slowEvery == 0 {
		for _, e := range t.ends {
			if e != nil {
				m.truths = e.diary.give(deg0+ddeg, m.truths)
			}
		}
	}
}

// fingers holds the suction plates open for late closing: from 60° before the outer dead centre to the set angle behind it.
// The unloader pushes a plate that flutters shut, but not one that the cylinder's pressure holds to its seat. Idle ends are
// held by load.
func (e *end) fingers(ps, deg float64) {
	if e.late <= 0 || e.idle {
		return
	}
	after := math.Mod(deg+float64(1-e.side)*180+7200, 360) // degrees after this end's outer dead centre
	if after > 300 {
		after -= 360
	}
	for i := range e.suction.plates {
		q := &e.suction.plates[i]
		switch {
		case after >= -60 && after < e.late:
			if q.x >= q.d.Lift || after < 0 && e.p < 1.03*ps {
				q.hold = q.d.Lift
			}
		default:
			q.hold = 0
		}
	}
}

// rings passes gas between the ends, upstream state, same nozzle law. A blind end stands at the atmosphere or at suction
// pressure; what goes there is lost to the working end.
func (t *throw) rings(m *Machine) {
	a, b := t.ends[crank.HE], t.ends[crank.CE]
	switch {
	case a != nil && b != nil:
		in, _ := t.stage.noz.flow(a.p, math.Sqrt(t.stage.gas.R*a.t), b.p, math.Sqrt(t.stage.gas.R*b.t))
		a.ring = in * a.ringA
		b.ring = -a.ring
		a.ringT, b.ringT = b.t, a.t
		if m.n%jetEvery == 0 {
			a.ringJet = ringJet(a, b.p)
		}
	case a == nil:
		t.blind(m, b)
	default:
		t.blind(m, a)
	}
}

func (t *throw) blind(m *Machine, e *end) {
	pl := t.atm
	if t.sk.BlindAtSuction {
		pl = t.ps
	}
	in, _ := t.stage.noz.flow(e.p, math.Sqrt(t.stage.gas.R*e.t), pl, t.suctionRT)
	e.ring, e.ringT = in*e.ringA, t.suctionT
	if m.n%jetEvery == 0 {
		e.ringJet = ringJet(e, pl)
	}
}

// ringJet is the sound power scale of the flow past the rings; they hiss less loudly outside than a valve does.
// With 0.3 and hissRef a leak of 1 % raises its own dwell by 3.4 dB on average over the valves (1.9 to 4.5 by coupling
// and path) and by 2.1 dB for rings, where vibration.md section 3 has 3.0 to 3.9 and 2.2 dB on another model.
func ringJet(e *end, other float64) float64 {
	return 0.3 * math.Abs(e.ring) * jetEnergy(e.gas, max(e.p, other), min(e.p, other), e.t)
}

// suctionIn mixes the suction passage: taken is what went into a cylinder end in this interval, kg; negative came back at temperature tt.
func (t *throw) suctionIn(taken, tt float64) {
	if taken == 0 {
		return
	}
	share := taken * t.perSuction * t.suctionT // of the passage's mass
	if taken < 0 {
		share, tt = -share, tt-t.suctionT
	} else {
		tt = t.stage.ts - t.suctionT
	}
	t.suctionT += tt * min(1, share)
}

// dischIn mixes the discharge passage: out is what an end delivered, kg, at temperature tt; negative went back into it.
func (t *throw) dischIn(out, tt float64) {
	if out <= 0 {
		return // the line's gas is the passage's own
	}
	t.dischT += (tt - t.dischT) * min(1, out*t.perDisch*t.dischT)
}

// slow follows faults and wall temperatures.
func (t *throw) slow(m *Machine, now float64) {
	ring := m.plan.ring[t.sk.ID].at(now)
	ad := t.adiabatic()
	t.controls(m, now)
	heat := m.plan.heat.at(now)
	for side, e := range t.ends {
		if e == nil {
			continue
		}
		e.ringA, e.heated = ring, m.par.WallHeat*heat
		if side == crank.CE {
			e.packing = m.plan.packing[t.sk.ID].at(now)
		}
		e.wall = t.stage.ts + m.par.WallAt*(ad-t.stage.ts)
		for _, g := range []*group{&e.suction, &e.disch} {
			for i := range g.plates {
				q := &g.plates[i]
				q.leak = m.plan.valveLeak[q.id].at(now)
				q.adhesion = m.plan.sticky[q.id].at(now)
				q.fail(m, now)
			}
		}
	}
	t.warm(m)
	for _, a := range t.accels {
		a.slow(m, now)
	}
}
