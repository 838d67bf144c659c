package crank

import (
	"errors"
	"fmt"
	"math"
)

// Validate says everything that is impossible about the geometry, joined into one error; nil when it can be built.
func (c Cylinder) Validate() error {
	var errs []error
	bad := func(format string, args ...any) { errs = append(errs, fmt.Errorf("crank: "+format, args...)) }

	for _, v := range []struct {
		name  string
		value float64
		zero  bool // may be zero
	}{
		{"bore", c.Bore, false},
		{"stroke", c.Stroke, false},
		{"connecting rod", c.ConRod, false},
		{"piston rod diameter", c.PistonRod, true},
		{"tail rod diameter", c.TailRod, true},
		{"head-end clearance", c.Clearance[HE], true},
		{"crank-end clearance", c.Clearance[CE], true},
		{"mass of piston and rod", c.MassPiston, true},
		{"mass of crosshead", c.MassCrosshead, true},
	} {
		switch {
		case math.IsNaN(v.value) || math.IsInf(v.value, 0):
			bad("%s is not a number", v.name)
		case v.value < 0:
			bad("%s is negative (%g)", v.name, v.value)
		case v.value == 0 && !v.zero:
			bad("%s is missing", v.name)
		}
	}
	if c.Bore > 0 && c.PistonRod >= c.Bore {
		bad("piston rod (%g m) is not thinner than the bore (%g m)", c.PistonRod, c.Bore)
	}
	if c.Bore > 0 && c.TailRod >= c.Bore {
		bad("tail rod (%g m) is not thinner than the bore (%g m)", c.TailRod, c.Bore)
	}
	if c.Stroke > 0 && c.ConRod > 0 && c.ConRod <= c.Radius() {
		bad("connecting rod (%g m) is not longer than the crank radius (%g m): the crank could not turn", c.ConRod, c.Radius())
	}
	return errors.Join(errs...)
}
