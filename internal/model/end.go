package model

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// Sub-steps: fine while a plate moves, coarse while all rest.
const (
	fineStep   = 10e-6 // s
	plateSteps = 2     // of a plate in a fine step
	coarseStep = 20e-6 // s
	heatEvery  = 16    // samples between two looks at the wall heat coefficient
	jetEvery   = 4     // samples between two looks at the speed of leaking gas and at the passages: less than half a degree
)

// end is one working side of a cylinder: one volume of gas and its valves.
type end struct {
	name       string
	side       int     // crank.HE or crank.CE
	area       float64 // m², of the piston on this side
	swept      float64
	clear0, vc float64 // m³, clearance volume without and with the pocket
	bore       float64
	gas        *Gas

	p, m, t float64 // Pa, kg, K
	k       float64 // isentropic exponent at the present pressure
	v       float64 // m³
	suction group
	disch   group
	idle    bool
	late    float64 // degrees after the outer dead centre; 0: none

	stepPocket, addPocket float64 // of the load step, and what the script adds; shares of the swept volume
	stepLate, addLate     float64 // likewise, degrees

	hA      float64 // W/K, wall heat coefficient times surface
	heated  float64 // factor on it
	wall    float64 // K
	ring    float64 // kg/s into the end past the rings
	ringT   float64 // K, of that gas
	ringA   float64 // m²
	ringJet float64 // sound power scale of the ring leak; of the pair, booked at the head end
	packing float64 // m²; 0 at the head end
	packJet float64 // sound power scale of the packing's leak, kg/s·(m/s)²
	diary   diary
}

// load puts a load step in force. Gas that a pocket adds or takes with it is at the cylinder's state.
func (e *end) load(s skid.Step, first bool) {
	e.stepPocket, e.stepLate = s.Pocket[e.name], s.Late[e.name]
	e.pocket(e.stepPocket+e.addPocket, first)
	e.idle = s.Idle[e.name]
	e.late = e.stepLate + e.addLate
	for i := range e.suction.plates {
		q := &e.suction.plates[i]
		q.hold = 0
		if e.idle {
			q.hold = q.d.Lift
			q.x, q.v = q.d.Lift, 0
		}
	}
}

// pocket sets the clearance added to that of the cylinder, a share of the swept volume.
func (e *end) pocket(share float64, first bool) {
	vc := e.clear0 + share*e.swept
	if !first {
		e.m *= (e.v - e.vc + vc) / e.v
	}
	e.v += vc - e.vc
	e.vc = vc
}

// volume at a piston travel from the head-end dead centre; stroke in m.
func (e *end) volume(travel, stroke float64) float64 {
	if e.side == crank.HE {
		return e.vc + e.area*travel
	}
	return e.vc + e.area*(stroke-travel)
}

// powk is r^k for a ratio near 1.
func powk(r, k float64) float64 {
	x := r - 1
	if x > 0.03 || x < -0.03 {
		return math.Pow(r, k)
	}
	k1, k2, k3, k4 := k-1, (k-2)/3, (k-3)/4, (k-4)/5
	return 1 + k*x*(1+0.5*k1*x*(1+k2*x*(1+k3*x*(1+k4*x))))
}

// heat refreshes the wall heat coefficient: Nu = 0.053·Re^0.8·Pr^0.6 on the hydraulic diameter 6V/A with a swirl speed that
// follows the crank (Adair, Qvale and Pearson, 1972; constants as repeated by later comparisons, the swirl from memory).
func (e *end) heat(deg, omega float64) {
	if e.heated == 0 {
		e.hA = 0
		return
	}
	own := deg
	if e.side == crank.CE {
		own += 180
	}
	surface := 2*e.area + math.Pi*e.bore*e.v/e.area
	de := 6 * e.v / surface
	c := math.Cos(own * math.Pi / 180)
	swirl := omega * (1.04 + 2*c*c - 1)
	if c > 0 {
		swirl *= 2
	}
	g := e.gas
	warm := math.Sqrt(e.t / 300)
	mu := g.Viscosity * warm * math.Sqrt(warm) // ~T^0.75
	re := e.m / e.v * swirl * de * de / (2 * mu)
	cp := g.K / (g.K - 1) * g.R
	nu := 0.053 * math.Exp(0.8*math.Log(re)) * g.pr06
	e.hA = e.heated * nu * mu * cp / g.Prandtl / de * surface
}

// path is one opening of the end to a neighbouring space during one sub-step.
type path struct {
	area, p, t  float64 // m², Pa and K of the neighbour
	perP, perRT float64 // 1/p, 1/√(R·T) of it
	in, slope   float64 // kg/s into the end and its derivative to the end's pressure
}

func pathTo(area, p, t, rt float64) path {
	return path{area: area, p: p, t: t, perP: 1 / p, perRT: 1 / rt}
}

// eval works out the flow at the end's pressure, given with its reciprocal and 1/√(R·T) of the end.
func (c *path) eval(n *nozzle, p, perP, perRT float64) {
	if c.area <= 0 {
		c.in, c.slope = 0, 0
		return
	}
	in, sl := n.between(p, perP, perRT, c.p, c.perP, c.perRT)
	c.in, c.slope = in*c.area, sl*c.area
}

// from is the temperature of what flows; t that of the end.
func (c *path) from(t float64) float64 {
	if c.in < 0 {
		return t
	}
	return c.t
}

// advance moves the end by one sampling interval. v0, vm, v1 are its volumes at the beginning, the middle and the end of it;
// deg0 and ddeg the throw's unwrapped angle at the beginning and its advance.
func (e *end) advance(m *Machine, t *throw, v0, vm, v1, deg0, ddeg float64) {
	if m.n%jetEvery == 0 {
		e.k = e.gas.K
		if e.gas.slope != 0 {
			e.k += e.gas.slope * math.Log(e.p/t.stage.mid)
		}
	}
	k, r := e.k, e.gas.R
	busy := e.busy(t)
	n := int(math.Ceil(m.dt / coarseStep * 0.999))
	if busy {
		n = int(math.Ceil(m.dt / fineStep * 0.999))
	}
	h := 1 / float64(n)
	dt := m.dt * h
	b, c := -3*v0+4*vm-v1, 2*v0-4*vm+2*v1
	va := v0
	s := pathTo(0, t.ps, t.suctionT, t.suctionRT)
	d := pathTo(0, t.pd, t.dischT, t.dischRT)
	var pk path
	if e.packing > 0 {
		pk = pathTo(e.packing, t.atm, 300, math.Sqrt(r*300))
	}
	noz, perR := t.stage.noz, 1/r
	book := e.diary.cur
	var sumS, sumD, sumPack, work float64
	leakS, leakD := 0.0, 0.0
	for i := range n {
		f := (float64(i) + 0.5) * h
		vb := v0 + f*(b+f*c)
		f = float64(i+1) * h
		vc := v0 + f*(b+f*c)
		pa := e.p
		// Adiabatic to the middle of the sub-step, then what flows and heats at constant volume, then adiabatic to its end.
		perV := 1 / vb
		pb := pa * powk(va*perV, k)
		perPB := 1 / pb
		rtb := pb * vb / e.m
		perRT := 1 / math.Sqrt(rtb)
		tb := rtb * perR
		s.area, d.area = e.suction.area(), e.disch.area()
		s.eval(noz, pb, perPB, perRT)
		d.eval(noz, pb, perPB, perRT)
		pk.eval(noz, pb, perPB, perRT)
		// Energy of an ideal gas at constant volume: dp/dt = kR/V·Σ ṁT + (k−1)/V·Q.
		ring := e.ring
		ringT := e.ringT
		if ring < 0 {
			ringT = tb
		}
		ts, td, tk := s.from(tb), d.from(tb), pk.from(tb)
		kr := k * r * perV
		rate := kr*(s.in*ts+d.in*td+pk.in*tk+ring*ringT) + (k-1)*perV*e.hA*(e.wall-tb)
		stiff := -kr * (s.slope*ts + d.slope*td + pk.slope*tk)
		// Exponential step of the linearised equation: second order, and stable however large the open area is.
		end, mid := relax(stiff * dt)
		dp := rate * dt * end
		mean := rate * dt * mid // the pressure change at which the linearised flows have their mean over the sub-step
		fs, fd, fp := s.in+s.slope*mean, d.in+d.slope*mean, pk.in+pk.slope*mean
		e.m += (fs + fd + fp + ring) * dt
		pd := pb + dp
		e.p = pd * powk(vb/vc, k)
		work -= 0.5*(pa+pb)*(vb-va) + 0.5*(pd+e.p)*(vc-vb)
		sumS += fs * dt
		sumD += fd * dt
		sumPack -= fp * dt
		leakS -= fs * dt * e.suction.leakShare(s.area)
		leakD += fd * dt * e.disch.leakShare(d.area)
		va = vc
		if busy {
			// The plates take smaller steps; the pressure goes from what it was to what it is.
			for j := range plateSteps {
				f := (float64(j) + 0.5) / plateSteps
				p := pa + f*(e.p-pa)
				at := (float64(i) + float64(j)/plateSteps) * h
				e.suction.step(m, t, e, t.ps-p, t.ps, dt/plateSteps, deg0, ddeg, at, h/plateSteps)
				e.disch.step(m, t, e, p-t.pd, t.pd, dt/plateSteps, deg0, ddeg, at, h/plateSteps)
			}
		}
	}
	e.v = va
	e.t = e.p * e.v / (e.m * r)
	inv := 1 / m.dt
	if m.n%jetEvery == 0 {
		e.suction.u2, e.disch.u2 = e.jet(t.ps, sumS), e.jet(t.pd, sumD)
	}
	e.suction.voice(sumS*inv, s.area, leakS*inv, m.dt)
	e.disch.voice(sumD*inv, d.area, leakD*inv, m.dt)
	if e.packing > 0 && m.n%jetEvery == 0 {
		e.packJet = math.Abs(sumPack) * inv * jetEnergy(e.gas, e.p, t.atm, e.t)
	}
	t.suctionIn(sumS, e.t)
	t.dischIn(-sumD, e.t)
	if book == nil {
		return
	}
	book.Work += work
	book.Taken += sumS
	book.Delivered -= sumD
	book.Leaked.Suction += leakS
	book.Leaked.Discharge += leakD
	book.Leaked.Packing += sumPack
	book.Leaked.Rings -= e.ring * m.dt
	if sumS > 0 {
		book.flowS += sumS
		book.psSum += sumS * t.ps
	}
	if sumD < 0 {
		book.flowD -= sumD
		book.pdSum -= sumD * t.pd
	}
}

// relax gives what a quantity that relaxes at a rate has done after z time constants, as a share of what it would have
// done without: at the end, (1 − e^−z)/z, and on the mean, (1 − (1 − e^−z)/z)/z.
func relax(z float64) (end, mean float64) {
	switch {
	case z < 0.01:
		mean = 1./2 - z*(1./6-z*(1./24-z/120))
	case z < 0.3:
		mean = 1./2 - z*(1./6-z*(1./24-z*(1./120-z*(1./720-z*(1./5040-z*(1./40320-z*(1./362880-z/3628800)))))))
	default:
		end = (1 - math.Exp(-z)) / z
		return end, (1 - end) / z
	}
	return 1 - z*mean, mean
}

// busy tells whether the end needs fine steps in this interval.
func (e *end) busy(t *throw) bool {
	for i := range e.suction.plates {
		if e.suction.plates[i].busy(t.ps-e.p, t.ps) {
			return true
		}
	}
	for i := range e.disch.plates {
		if e.disch.plates[i].busy(e.p-t.pd, t.pd) {
			return true
		}
	}
	return false
}

// jet is jetEnergy of the flow between the end and a line; flow is positive into the end.
func (e *end) jet(line, flow float64) float64 {
	if flow < 0 {
		return jetEnergy(e.gas, e.p, line, e.t)
	}
	return jetEnergy(e.gas, line, e.p, e.t)
}

// jetEnergy is the square of the ideal speed of gas at t expanding between two pressures, (m/s)², up to a ratio of 4.
func jetEnergy(g *Gas, from, to, t float64) float64 {
	if from <= to {
		return 0
	}
	d := math.Min(1-to/from, 0.75)
	cp := g.K / (g.K - 1) * g.R
	e := (g.K - 1) / g.K
	// 1 − (1−d)^e by its series with the tail lumped: within 2 per cent, enough for a sound level.
	return 2 * cp * t * e * d * (1 + 0.5*(1-e)*d*(1+(2-e)/3*d*(1+(3-e)/4*d*(1+1.9*d))))
}
