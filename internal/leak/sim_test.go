package leak

import (
	"math"

	"lapwing/internal/crank"
)

// sim is a forward simulation that knows nothing of the fit: both ends as open systems with mass and energy balances,
// ideal gas, adiabatic walls, massless check valves, constant leak areas, classical Runge-Kutta.
type sim struct {
	c           crank.Cylinder
	rpm         float64
	ps, pd, ts  float64
	k, r        float64
	leak        [Paths]float64 // m²
	valve       [2]float64     // m², flow area of an open suction and discharge group
	hold        [2]float64     // degrees that the suction valves are held open into the compression stroke
	idle        [2]bool        // suction valves held open all turn
	stepDeg     float64
	revolutions int
	td          float64        // result: mass-mean temperature of the delivered gas
	delivered   float64        // kg per turn, both ends
	leaked      [Paths]float64 // kg per turn through each leak: out through suction, in through discharge, both ways through rings
	p, v        [2][]float64   // result on a 0.5° grid from −60° to 420°
	closed      [2][2]Range
}

// orifice is the mass flow from a to b through area, kg/s, signed.
func (s *sim) orifice(area, pa, ta, pb, tb float64) (flow, tUp float64) {
	sign := 1.0
	if pa < pb {
		pa, pb, ta, sign = pb, pa, tb, -1
	}
	r := math.Max(pb/pa, math.Pow(2/(s.k+1), s.k/(s.k-1)))
	d := 1 - pb/pa
	psi := math.Sqrt(2 * s.k / (s.k - 1) * (math.Pow(r, 2/s.k) - math.Pow(r, (s.k+1)/s.k)))
	return sign * area * pa / math.Sqrt(s.r*ta) * psi * math.Sqrt(d/(d+.002)), ta
}

// held reports whether an end's suction valves are held open at an angle.
func (s *sim) held(end int, deg float64) bool {
	if s.idle[end] {
		return true
	}
	start := 180.0
	if end == crank.CE {
		start = 0
	}
	since := math.Mod(deg-start+3600, 360)
	return since < s.hold[end]
}

// rates gives dp/dθ and dm/dθ (per radian) of both ends, and the delivered flow with its temperature.
func (s *sim) rates(deg float64, p, m [2]float64) (dp, dm [2]float64, out, outT float64) {
	w := s.rpm * 2 * math.Pi / 60
	var temp, vol [2]float64
	for e := range p {
		vol[e] = s.c.Volume(e, deg)
		temp[e] = p[e] * vol[e] / (m[e] * s.r)
	}
	for e := range p {
		var mass, heat float64 // kg/s and kg K/s into the end
		in := func(area, pOut, tOut float64) {
			f, t := s.orifice(area, pOut, tOut, p[e], temp[e])
			mass += f
			heat += f * t
		}
		in(s.leak[HS+2*e], s.ps, s.ts)
		in(s.leak[HD+2*e], s.pd, s.td)
		in(s.leak[RG], p[1-e], temp[1-e])
		if p[e] < s.ps || s.held(e, deg) {
			in(s.valve[0], s.ps, s.ts)
		}
		if p[e] > s.pd {
			f, t := s.orifice(s.valve[1], p[e], temp[e], s.pd, s.td)
			mass -= f
			heat -= f * t
			out += f
			outT += f * t
		}
		dm[e] = mass / w
		dp[e] = (s.k*s.r*heat/w - s.k*p[e]*s.c.DVolume(e, deg)) / vol[e]
	}
	return dp, dm, out / w, outT / w
}

// countLeaks adds what leaks during dt seconds.
func (s *sim) countLeaks(deg float64, p, m [2]float64, dt float64) {
	temp := func(e int) float64 { return p[e] * s.c.Volume(e, deg) / (m[e] * s.r) }
	for e := range p {
		out, _ := s.orifice(s.leak[HS+2*e], p[e], temp(e), s.ps, s.ts)
		in, _ := s.orifice(s.leak[HD+2*e], s.pd, s.td, p[e], temp(e))
		s.leaked[HS+2*e] += max(out, 0) * dt
		s.leaked[HD+2*e] += max(in, 0) * dt
	}
	rings, _ := s.orifice(s.leak[RG], p[0], temp(0), p[1], temp(1))
	s.leaked[RG] += math.Abs(rings) * dt
}

func (s *sim) run() {
	if s.stepDeg == 0 { // half of it changes no area by more than 0.01 %
		s.stepDeg = .5
	}
	if s.revolutions == 0 {
		s.revolutions = 3
	}
	const points = 961
	s.td = s.ts * math.Pow(s.pd/s.ps, (s.k-1)/s.k)
	deg := 0.0
	p := [2]float64{s.pd, s.ps}
	m := [2]float64{s.pd * s.c.Volume(crank.HE, 0) / (s.r * s.td), s.ps * s.c.Volume(crank.CE, 0) / (s.r * s.ts)}
	h := s.stepDeg * math.Pi / 180
	every := int(math.Round(.5 / s.stepDeg))
	n := int(math.Round(360 / s.stepDeg))
	var one [2][720]float64 // the last revolution
	for rev := range s.revolutions {
		var sumOut, sumOutT float64
		for i := range n {
			deg = float64(i) * s.stepDeg
			if rev == s.revolutions-1 && i%every == 0 {
				one[0][i/every], one[1][i/every] = p[0], p[1]
			}
			add := func(a, b [2]float64, f float64) [2]float64 {
				return [2]float64{a[0] + f*b[0], a[1] + f*b[1]}
			}
			if rev == s.revolutions-1 {
				s.countLeaks(deg, p, m, h/(s.rpm*2*math.Pi/60))
			}
			p1, m1, o1, t1 := s.rates(deg, p, m)
			p2, m2, o2, t2 := s.rates(deg+s.stepDeg/2, add(p, p1, h/2), add(m, m1, h/2))
			p3, m3, o3, t3 := s.rates(deg+s.stepDeg/2, add(p, p2, h/2), add(m, m2, h/2))
			p4, m4, o4, t4 := s.rates(deg+s.stepDeg, add(p, p3, h), add(m, m3, h))
			for e := range p {
				p[e] += h / 6 * (p1[e] + 2*p2[e] + 2*p3[e] + p4[e])
				m[e] += h / 6 * (m1[e] + 2*m2[e] + 2*m3[e] + m4[e])
			}
			sumOut += h / 6 * (o1 + 2*o2 + 2*o3 + o4)
			sumOutT += h / 6 * (t1 + 2*t2 + 2*t3 + t4)
		}
		if sumOut > 0 {
			s.td = sumOutT / sumOut
		}
		s.delivered = sumOut
	}
	for e := range s.p {
		s.p[e] = make([]float64, points)
		for i := range s.p[e] {
			s.p[e][i] = one[e][((i-120)%720+720)%720]
		}
		s.v[e] = s.c.Volumes(nil, e, -60, .5, points)
		s.closed[e] = s.closedRuns(e)
	}
}

// closedRuns finds the points within 0…360° where the pressure lies between the lines on each stroke.
func (s *sim) closedRuns(e int) (runs [2]Range) {
	if s.idle[e] {
		return runs
	}
	for i := 120; i < 840; i++ {
		deg := -60 + .5*float64(i)
		if s.p[e][i] <= s.ps || s.p[e][i] >= s.pd || s.held(e, deg) {
			continue
		}
		kind := Expansion
		if compressing(e, deg) {
			kind = Compression
		}
		r := &runs[kind]
		if r.To == 0 {
			r.From = i
		}
		r.To = i + 1
	}
	return runs
}

func (s *sim) input() *Input {
	return &Input{
		Cylinder: s.c, Lo: -60, Step: .5, P: s.p, V: s.v, Closed: s.closed,
		Late: [2]bool{s.hold[0] > 0, s.hold[1] > 0},
		Ps:   s.ps, Pd: s.pd, Ts: s.ts, Td: s.td, K: s.k, RZ: s.r,
		Omega: []float64{s.rpm * 2 * math.Pi / 60},
	}
}
