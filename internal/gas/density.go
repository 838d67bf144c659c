package gas

import "math"

// Limits of the density search, in multiples of the reducing density. Liquids of these substances reach about 3.2.
const (
	densityTop  = 4.0
	densityStep = 0.02
	nearBy      = 1.08 // of a density thought to be close
)

// gasRoot gives the molar density (mol/m³) that is reached from the dilute gas by compressing at constant temperature
// without meeting an unstable stretch. Not ok: the isotherm turns over below p, so there is no gas at this pressure.
func (s *isotherm) gasRoot(p float64) (density float64, ok bool) {
	dr := 1 / s.vr
	lo := 0.0
	// A first look where an ideal gas would be keeps the steps small for thin gas.
	hi := min(p/(gasConstant*s.t)*.5, densityStep*dr)
	for ; hi <= densityTop*dr; hi += densityStep * dr {
		v, slope := s.pressure(hi)
		if v >= p {
			return s.refine(p, lo, hi), true
		}
		if slope <= 0 {
			return 0, false
		}
		lo = hi
	}
	return 0, false
}

// liquidRoot gives the molar density that is reached from the dense liquid by expanding, and whether there is one.
// Above the critical region it is the same as the gas root. near is a density thought to be close, 0: none; the way down
// then begins a little above it, where that is still liquid above p.
func (s *isotherm) liquidRoot(p, near float64) (density float64, ok bool) {
	dr := 1 / s.vr
	hi, started := densityTop*dr, false
	if top := nearBy * near; near > 0 && top < hi {
		if v, slope := s.pressure(top); v > p && slope > 0 {
			hi, started = top, true
		}
	}
	for lo := hi; lo > 0; lo -= densityStep * 2 * dr {
		v, slope := s.pressure(lo)
		switch {
		case !started: // the equation is not meant for solids: it may bend far above the liquid
			started = slope > 0 && v > p
		case v <= p:
			return s.refine(p, lo, hi), true
		case slope <= 0:
			return 0, false
		}
		hi = lo
	}
	if !started {
		return 0, false
	}
	return s.refine(p, 0, hi), true
}

// refine is Newton's method kept inside a bracket with p(lo) < p ≤ p(hi).
func (s *isotherm) refine(p, lo, hi float64) float64 {
	x := hi
	if ideal := p / (gasConstant * s.t); ideal > lo && ideal < hi {
		x = ideal
	}
	for range 200 {
		v, slope := s.pressure(x)
		if v >= p {
			hi = x
		} else {
			lo = x
		}
		next := x - (v-p)/slope
		if !(next > lo && next < hi) {
			if next == lo || next == hi {
				return next
			}
			next = lo + (hi-lo)/2
		}
		if math.Abs(next-x) <= 4e-16*x {
			return next
		}
		x = next
	}
	return x
}
