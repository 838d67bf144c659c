package duty

import "math"

// Region gives the duties at which a cell is used: pressure ratio, speed in rpm, suction pressure in Pa.
func (c *Cell) Region() (ratio, rpm, ps [2]float64) {
	s := &c.Shape
	return [2]float64{math.Exp(s.Lo[0]), math.Exp(s.Hi[0])}, [2]float64{s.Lo[1], s.Hi[1]}, [2]float64{math.Exp(s.Lo[2]), math.Exp(s.Hi[2])}
}

// Expected gives what a feature reads in the middle of what the cell has seen, and the spread of a block of evidence, both
// SI; false when it was not learnt.
func (c *Cell) Expected(subject, name string) (value, spread float64, ok bool) {
	m := c.model(subject, name)
	if m == nil {
		return math.NaN(), math.NaN(), false
	}
	x := c.Shape.row(c.Shape.Centre)
	return dot(&m.Coef, &x), m.blockSpread(blockTurns), true
}
