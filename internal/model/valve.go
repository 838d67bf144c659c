package model

import "math/rand/v2"

// plate is one valve: a single mass between seat (x = 0) and stop (x = lift), held to the seat by preload and spring.
// m·x” = A·Δp − F0 − k·x − c·x' with an extra force while it sticks to the seat; restitution at both ends.
type plate struct {
	id        string
	index     int // among the throw's valves
	discharge bool
	measured  bool // its cover has a thermometer
	healthy   ValveData
	d         ValveData // as it is now, faults in it
	x, v      float64
	hold      float64 // m, how far something holds it open: unloader or late closing
	sticks    float64 // this opening's adhesion over the nominal one
	broken    float64 // 0 whole .. 1
	missing   float64 // share of the sealing element that is gone
	springs   float64 // factor on the spring forces
	grip      float64 // adhesion to the stop, share of line pressure
	leak      float64 // m²
	adhesion  float64 // share of line pressure
	perLift   float64 // FlowArea/Lift

	leakRate  float64 // kg/s through the leak area while closed, of the last interval, in the sense of the loss
	leaked    float64 // kg, summed for the cover's temperature
	jet, open float64 // acoustic power of leak jet and of open flow, last interval, kg/s·(m/s)²
	cover     float64 // K
	coverSet  bool
}

// contactSpeed is the speed below which a plate stays on seat or stop instead of bouncing, m/s.
const contactSpeed = 0.05

// heard is the least impact speed that is booked and felt, m/s.
const heard = 0.1

// refresh puts faults into the plate's mechanics: a broken plate has lost some mass and springs and bounces more.
func (q *plate) refresh() {
	q.d = q.healthy
	q.d.Stiffness *= q.springs
	q.d.Preload *= q.springs
	b := max(q.broken, min(1, missingWeakens*q.missing))
	q.d.Mass *= 1 - 0.25*b
	q.d.Stiffness *= 1 - 0.5*b
	q.d.Preload *= 1 - 0.6*b
	q.d.Stop += 0.3 * b
	q.d.Seat += 0.2 * b
	q.perLift = q.d.FlowArea / q.d.Lift
}

func (q *plate) area() float64 { return q.perLift * q.x }

// force is the resultant on the plate towards opening, for a pressure difference dp in that sense.
func (q *plate) force(dp, line float64) float64 {
	f := q.d.ForceArea*dp - q.d.Preload - q.d.Stiffness*q.x - q.d.Damping*q.v
	if q.x == 0 {
		f -= q.adhesion * q.sticks * line * q.d.ForceArea
	} else if q.grip > 0 && q.x >= q.d.Lift {
		f += q.grip * q.sticks * line * q.d.ForceArea
	}
	return f
}

// busy tells whether the plate moves, or is about to within some few samples.
func (q *plate) busy(dp, line float64) bool {
	switch {
	case q.v != 0:
		return true
	case q.x == 0:
		return q.force(dp, line) > -0.015*line*q.d.ForceArea
	case q.hold >= q.x && q.hold > 0:
		return false
	case q.x >= q.d.Lift:
		return q.force(dp, line) < 0.25*(q.d.Preload+q.d.Stiffness*q.d.Lift)
	}
	return true
}

// hit is what a plate's step says about contact: speed 0 is none.
type hit struct {
	stop  bool
	speed float64 // m/s, positive
	at    float64 // share of the step gone before the contact
}

// move steps the plate by dt under a pressure difference (semi-implicit Euler, dt some microseconds).
func (q *plate) move(dp, line, dt float64, scatter *rand.Rand, amount float64) hit {
	if q.hold > 0 && q.x <= q.hold && q.v <= 0 {
		q.x, q.v = q.hold, 0
		if q.hold >= q.d.Lift || q.force(dp, line) <= 0 {
			return hit{}
		}
	}
	f := q.force(dp, line)
	if q.v == 0 && (q.x == 0 && f <= 0 || q.x >= q.d.Lift && f >= 0) {
		return hit{}
	}
	x0 := q.x
	q.v += f / q.d.Mass * dt
	q.x += q.v * dt
	switch {
	case q.x >= q.d.Lift:
		h := hit{stop: true, speed: q.v, at: min(1, (q.d.Lift-x0)/(q.v*dt))}
		q.x, q.v = q.d.Lift, -q.d.Stop*q.v
		if -q.v < contactSpeed {
			q.v = 0
		}
		return h
	case q.x <= q.hold:
		from := x0 - q.hold
		h := hit{speed: -q.v, at: 1}
		if q.v < 0 && from > 0 {
			h.at = min(1, from/(-q.v*dt))
		}
		seat := q.hold == 0
		q.x, q.v = q.hold, -q.d.Seat*q.v
		if q.v < contactSpeed {
			q.v = 0
		}
		if !seat {
			q.v = 0
			return hit{} // resting on the unloader's fingers makes no seat impact worth hearing
		}
		if h.speed > heard && amount > 0 {
			q.sticks = max(0.2, 1+0.12*amount*scatter.NormFloat64())
		}
		return h
	}
	return hit{}
}
