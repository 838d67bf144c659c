package window

import (
	"math"
	"math/rand/v2"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
)

// rig is a small compressor cylinder for tests: an open adiabatic ideal-gas system per end with plate valves that
// move under gas force and spring, solved at fixed small steps. It knows when its plates lift and strike.
type rig struct {
	cyl          crank.Cylinder
	k, ps, pd    float64
	rpm, u       float64
	pulse        float64    // share of line pressure, twice a turn
	idle         [2]bool    // suction plates held open
	late         [2]float64 // degrees after the outer dead centre to which they are held
	leakS, leakD [2]float64 // m²
	area, mass   [2]float64 // of suction and discharge: full-lift flow area m², plate mass kg
	noise        float64    // share of pd, per grid point
	seed         uint64
}

const rigR, rigTs = 518.28, 303.15 // J/(kg K) of methane, K

// m1 is the machine of the worked examples (bore 254 mm, stroke 152.4 mm, 18/20 % clearance).
var m1 = crank.Cylinder{Bore: .254, Stroke: .1524, ConRod: .381, PistonRod: .0635, Clearance: [2]float64{.18, .20},
	MassPiston: 80, MassCrosshead: 60}

func newRig(ratio, rpm float64) rig {
	return rig{cyl: m1, k: 1.3, ps: 2e6, pd: 2e6 * ratio, rpm: rpm, u: .3, pulse: .01,
		area: [2]float64{38e-4, 34e-4}, mass: [2]float64{.16, .13}, noise: .0003, seed: 1}
}

// strike is the truth of one event: degrees on the padded grid; NaN when it did not happen.
type strike struct{ lift, hit float64 }

// plate is one valve group seen as a single plate.
type plate struct{ x, v float64 }

const plateLift, plateForce, plateSpring, platePreload, plateDamping = .002, .0052, 35e3, 60.0, 40.0 // SI

// move advances a plate under a pressure difference and reports whether it struck stop or seat.
func (p *plate) move(dp, mass, dt float64) (hit float64) {
	p.v += dt * (plateForce*dp - platePreload - plateSpring*p.x - plateDamping*p.v) / mass
	was := p.x
	p.x += dt * p.v
	switch {
	case p.x <= 0:
		if was > 0 && p.v < -.05 { // not one that rests there
			hit = -p.v
		}
		p.x, p.v = 0, max(0, -.2*p.v)
		if p.v < .05 {
			p.v = 0
		}
	case p.x >= plateLift:
		if was < plateLift && p.v > .05 {
			hit = p.v
		}
		p.x, p.v = plateLift, min(0, -.2*p.v)
	}
	return hit
}

// nozzle is isentropic flow, kg/s, positive from a to b.
func nozzle(area, pa, ta, pb, tb, k float64) float64 {
	sign := 1.0
	if pb > pa {
		pa, pb, ta, sign = pb, pa, tb, -1
	}
	r := math.Max(pb/pa, math.Pow(2/(k+1), k/(k-1)))
	return sign * area * pa / math.Sqrt(rigR*ta) * math.Sqrt(2*k/(k-1)*(math.Pow(r, 2/k)-math.Pow(r, (k+1)/k)))
}

// solved is a rig's settled cycle: noise-free pressures and the truth.
type solved struct {
	rig
	p     [2][]float64
	truth [2][Events]strike
}

func (r rig) solve() *solved {
	s := &solved{rig: r}
	for e := range s.p {
		s.p[e], s.truth[e] = r.cycle(e, turn.Grid{Lo: -turn.PadDeg, Step: .5, N: 961})
	}
	return s
}

// turn gives one padded turn with its own noise.
func (r *solved) turn(number int64) *turn.Turn {
	g := turn.Grid{Lo: -turn.PadDeg, Step: .5, N: 961}
	tt := turn.Throw{RPM: r.rpm, U: r.u, Grid: g, T0: 0, T1: 60 / r.rpm * 51200}
	perDeg := 51200 / (6 * r.rpm)
	for i := range g.N {
		tt.Pos = append(tt.Pos, 1e6+perDeg*g.At(i))
		tt.Omega = append(tt.Omega, r.rpm*math.Pi/30)
	}
	rng := rand.New(rand.NewPCG(r.seed, uint64(number)))
	vib := turn.Vib{Channel: "a1", Rate: 51200, Peak: make([]float64, g.N), RMS: make([]float64, g.N)}
	for i := range vib.RMS {
		vib.RMS[i] = .3 * (1 + .1*rng.NormFloat64())
		vib.Peak[i] = 3 * vib.RMS[i]
	}
	for e := range 2 {
		tt.P[e] = make([]float64, g.N)
		for i := range tt.P[e] {
			tt.P[e][i] = r.p[e][i] + r.noise*r.pd*rng.NormFloat64()
		}
		for k, s := range r.truth[e] {
			amp := []float64{DischargeCloses: 6, SuctionOpens: 20, SuctionCloses: 6, DischargeOpens: 25}[k]
			for i := range g.N {
				if ms := (g.At(i) - s.hit) / (6 * r.rpm / 1000); ms > -.05 {
					a := amp * math.Exp(-max(ms, 0)/.7)
					vib.Peak[i] = math.Max(vib.Peak[i], a)
					vib.RMS[i] = math.Hypot(vib.RMS[i], a/2.5)
				}
			}
		}
	}
	tt.Vib = []turn.Vib{vib}
	return &turn.Turn{Number: number, RPM: r.rpm, Throws: []turn.Throw{tt}}
}

// cycle solves one end from three turns before until the grid's end.
func (r rig) cycle(e int, g turn.Grid) ([]float64, [Events]strike) {
	nan := math.NaN()
	truth := [Events]strike{{nan, nan}, {nan, nan}, {nan, nan}, {nan, nan}}
	deg := -60.0 - 360
	const step = .05
	dt := step / (6 * r.rpm)
	v := r.cyl.Volume(e, deg)
	p, t := r.ps, rigTs
	m := p * v / (rigR * t)
	td := rigTs * math.Pow(r.pd/r.ps, (r.k-1)/r.k)
	var s, d plate
	var hardS, hardD float64
	out := make([]float64, 0, g.N)
	outer := 180 * float64(1-e) // suction closing's dead centre
	next := 0
	for next < g.N {
		if deg >= g.At(next)-1e-9 {
			out = append(out, p)
			next++
		}
		wave := math.Cos(2 * deg * math.Pi / 180)
		ps, pd := r.ps*(1+r.pulse*wave), r.pd*(1-r.pulse*wave)
		since := math.Mod(deg-outer+720, 360)
		held := r.idle[e] || (since < r.late[e] || since > 330 && r.late[e] > 0)
		xs, xd := s.x, d.x
		hitS := s.move(ps-p, r.mass[0], dt)
		hitD := d.move(p-pd, r.mass[1], dt)
		if held {
			s = plate{x: plateLift}
			hitS = 0
		}
		r.note(&truth, e, deg, xs, s.x, hitS, &hardS, SuctionOpens, SuctionCloses)
		r.note(&truth, e, deg, xd, d.x, hitD, &hardD, DischargeOpens, DischargeCloses)
		in := nozzle(r.area[0]*s.x/plateLift+r.leakS[e], ps, rigTs, p, t, r.k)
		outF := nozzle(r.area[1]*d.x/plateLift+r.leakD[e], p, t, pd, td, r.k)
		tin, tout := rigTs, t
		if in < 0 {
			tin = t
		}
		if outF < 0 {
			tout = td
		}
		v2 := r.cyl.Volume(e, deg+step)
		p += (r.k*rigR*(in*tin-outF*tout)*dt - r.k*p*(v2-v)) / v
		m += (in - outF) * dt
		v = v2
		t = p * v / (m * rigR)
		deg += step
	}
	return out, truth
}

// note keeps the first lift over 10 % and the first stop strike of an opening, and the hardest seat strike of a
// closing, each near where this package looks for it.
func (r rig) note(truth *[Events]strike, e int, deg, x0, x1, hit float64, hardest *float64, open, shut Event) {
	stroke := Expansion
	if open == DischargeOpens {
		stroke = Compression
	}
	start := strokeStart(e, stroke)
	const tenth = .1 * plateLift
	if deg > start && deg < start+185 && x0 < tenth && x1 >= tenth && math.IsNaN(truth[open].lift) {
		truth[open].lift = deg
	}
	if deg > start && deg < start+185 && hit > 0 && x1 > tenth && math.IsNaN(truth[open].hit) {
		truth[open].hit = deg
	}
	closeAt := strokeStart(e, 1-stroke)
	if deg > closeAt-40 && deg < closeAt+30+r.late[e] && x1 < tenth && hit > *hardest {
		truth[shut].hit, *hardest = deg, hit
	}
}
