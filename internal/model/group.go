package model

import (
	"math"

	"lapwing/internal/crank"
)

// group is the valves of one function at one end.
type group struct {
	discharge bool
	plates    []plate
	mean      float64 // mean lift, share
	u2        float64 // (m/s)², square of the ideal speed of what flows
	above     bool    // mean lift has passed 30 % and no plate has sat since
	wanted    bool    // its closing crossing is still to be booked
	up        []bool  // by plate: it has passed 30 % of its lift and has not sat since
}

func (g *group) area() float64 {
	a := 0.0
	for i := range g.plates {
		a += g.plates[i].area() + g.plates[i].leak
	}
	return a
}

// leakArea is that of the closed plates: what flows through the seat of an open valve is no leak.
func (g *group) leakArea() float64 {
	a := 0.0
	for i := range g.plates {
		if g.plates[i].x == 0 {
			a += g.plates[i].leak
		}
	}
	return a
}

// leakShare is the closed plates' part of an area that is that of the whole group.
func (g *group) leakShare(area float64) float64 {
	if area <= 0 {
		return 0
	}
	shut, open := 0.0, false
	for i := range g.plates {
		if g.plates[i].x == 0 {
			shut += g.plates[i].leak
		} else {
			open = true
		}
	}
	if !open {
		return 1
	}
	return shut / area
}

// voice shares the group's flow among its valves for noise and cover temperatures. Sound power goes as mass flow times the
// square of its speed.
func (g *group) voice(flow, area, leak, dt float64) {
	u2 := g.u2
	closed := g.leakArea()
	for i := range g.plates {
		q := &g.plates[i]
		q.leakRate, q.jet, q.open = 0, 0, 0
		if q.x == 0 {
			if closed > 0 {
				q.leakRate = leak * q.leak / closed
				q.leaked += q.leakRate * dt
				q.jet = math.Abs(q.leakRate) * u2
			}
		} else if area > 0 {
			q.open = math.Abs(flow) * (q.area() + q.leak) / area * u2
		}
	}
}

// step moves the group's plates by one sub-step and books crossings and impacts. at and h place the sub-step in the interval.
func (g *group) step(m *Machine, t *throw, e *end, dp, line, dt, deg0, ddeg, at, h float64) {
	before := g.mean
	sum := 0.0
	if g.up == nil {
		g.up = make([]bool, len(g.plates))
	}
	for i := range g.plates {
		q := &g.plates[i]
		hit := q.move(dp, line, dt, m.scatter, m.par.Scatter)
		sum += q.x / q.d.Lift
		if hit.speed > heard {
			g.impact(m, t, e, i, hit, deg0, ddeg, at+h*hit.at)
		}
		switch {
		case !g.up[i] && q.x >= 0.3*q.d.Lift:
			g.up[i] = true
			g.reopened(e, i, deg0+ddeg*at)
		case g.up[i] && q.x == 0:
			g.up[i] = false
		}
	}
	g.mean = sum / float64(len(g.plates))
	const open = 0.1
	switch {
	case before < open && g.mean >= open:
		f := at + h*(open-before)/(g.mean-before)
		g.cross(m, e, false, deg0+ddeg*f, f)
	case before >= open && g.mean < open:
		f := at + h*(open-before)/(g.mean-before)
		g.cross(m, e, true, deg0+ddeg*f, f)
	}
	if before < 0.3 && g.mean >= 0.3 {
		g.above, g.wanted = true, true
	}
}

// cross books the mean lift passing 10 %. An opening counts only in the half turn in which this group opens, so that a bounce
// after a late closing is none; a closing counts until the plates have sat.
func (g *group) cross(m *Machine, e *end, closing bool, deg, f float64) {
	b, in := e.diary.of(deg, g.discharge, closing)
	if b == nil {
		return
	}
	ev := b.group(g.discharge)
	at := (float64(m.n-1) + f) * m.dt
	second := g.discharge == (e.side == crank.HE) // opens between 180° and 360°
	switch {
	case closing && g.wanted:
		ev.Close.Lift, ev.Close.LiftTime = in, at
		g.wanted = g.above
	case !closing && math.IsNaN(ev.Open.Lift) && (in >= 180) == second:
		ev.Open.Lift, ev.Open.LiftTime = in, at
	}
}

// impact books a plate's contact and sends it to the accelerometers.
func (g *group) impact(m *Machine, t *throw, e *end, i int, h hit, deg0, ddeg, f float64) {
	q := &g.plates[i]
	deg := deg0 + ddeg*f
	at := float64(m.n-1) + f // in samples
	t.strike(m, q, h, at)
	b, in := e.diary.of(deg, g.discharge, !h.stop)
	if b == nil {
		return
	}
	b.Impacts = append(b.Impacts, Impact{Valve: q.id, Stop: h.stop, Deg: in, Time: at * m.dt, Speed: h.speed})
	ev := b.group(g.discharge)
	switch {
	case h.stop && math.IsNaN(ev.Open.Impact) && !math.IsNaN(ev.Open.Lift):
		ev.Open.Impact, ev.Open.ImpactTime, ev.Open.Speed = in, at*m.dt, h.speed
	case !h.stop:
		if g.up[i] {
			g.above = false
		} else if !(h.speed > b.closing(g, i).Speed) { // a bounce, or no closing at all
			break
		}
		b.shut(g, i, Event{Impact: in, ImpactTime: at * m.dt, Speed: h.speed})
	}
}

// reopened strikes out the closing of a plate that has lifted again before the group's closing was over: it fluttered.
func (g *group) reopened(e *end, i int, deg float64) {
	if b, _ := e.diary.of(deg, g.discharge, true); b != nil {
		b.shut(g, i, noEvent())
	}
}

// closing is the seat impact of one plate that counts so far.
func (b *book) closing(g *group, i int) *Event {
	last := &b.last[0]
	if g.discharge {
		last = &b.last[1]
	}
	for len(*last) < len(g.plates) {
		*last = append(*last, noEvent())
	}
	return &(*last)[i]
}

// shut books the closing of one plate: the hardest hit on its seat since it was last open by more than 30 %. The group's
// is the hardest of its plates'.
func (b *book) shut(g *group, i int, ev Event) {
	*b.closing(g, i) = ev
	c := &b.group(g.discharge).Close
	c.Impact, c.ImpactTime, c.Speed = math.NaN(), math.NaN(), math.NaN()
	for i := range g.plates {
		l := b.closing(g, i)
		if math.IsNaN(c.Speed) || l.Speed > c.Speed {
			c.Impact, c.ImpactTime, c.Speed = l.Impact, l.ImpactTime, l.Speed
		}
	}
}
