package model

import (
	"math"

	"lapwing/internal/crank"
)

// pinMost bounds what is kept of a turn that does not end because the machine stands.
const pinMost = 1 << 19

// pin keeps a turn's combined rod load at the crosshead pin, from the true pressures and the piston's travel at three
// samples in a row: whatever the shaft does within the turn is in it.
type pin struct {
	x0, x1 float64 // m, travel at the two samples before; NaN before there are any
	load   []float64
}

// book adds the load at the sample before the present one; travel is the present one's.
func (q *pin) book(t *throw, dt, travel, he, ce float64) {
	if !math.IsNaN(q.x0) {
		c := &t.sk.Cylinder
		acc := (travel - 2*q.x1 + q.x0) / (dt * dt)
		gas := (he-t.atm)*c.Area(crank.HE) - (ce-t.atm)*c.Area(crank.CE)
		if len(q.load) < pinMost {
			q.load = append(q.load, gas-(c.MassPiston+c.MassCrosshead)*acc)
		}
	}
	q.x0, q.x1 = q.x1, travel
}

// turn closes the books of a turn. Samples stand for equal angles: the shaft's ripple moves an angle by a tenth of a
// degree, and a stay of half a turn by less.
func (q *pin) turn() crank.Reversal {
	r := crank.Reverse(q.load)
	q.load = q.load[:0]
	return r
}

// beside is the pressure on a side of the piston: of the end, or of what stands behind a blind one.
func (t *throw) beside(side int) float64 {
	switch {
	case t.ends[side] != nil:
		return t.ends[side].p
	case t.sk.BlindAtSuction:
		return t.ps
	}
	return t.atm
}
