package gas

import "math"

// The ideal-gas part of one component, in units of R (its own R* = 8.31451 J/(mol K) already scaled in):
// cp0/R* = n03 + Σ sinh-terms n (θ/T)²/sinh²(θ/T) + Σ cosh-terms n (θ/T)²/cosh²(θ/T).

// cv gives cv0/R.
func (k *component) cv(t float64) float64 {
	s := k.n03 - 1
	for j, n := range k.hyper {
		if n == 0 || k.theta[j] == 0 {
			continue
		}
		u := k.theta[j] / t
		q := math.Sinh(u)
		if j%2 == 1 {
			q = math.Cosh(u)
		}
		s += n * u * u / (q * q)
	}
	return idealScale * s
}

// energy gives u0/(RT) without its integration constant.
func (k *component) energy(t float64) float64 {
	s := k.n03 - 1
	for j, n := range k.hyper {
		if n == 0 || k.theta[j] == 0 {
			continue
		}
		u := k.theta[j] / t
		if j%2 == 0 {
			s += n * u / math.Tanh(u)
		} else {
			s -= n * u * math.Tanh(u)
		}
	}
	return idealScale * s
}

// free gives the temperature part of a0/(RT) without its integration constants.
func (k *component) free(t float64) float64 {
	s := -(k.n03 - 1) * math.Log(t)
	for j, n := range k.hyper {
		if n == 0 || k.theta[j] == 0 {
			continue
		}
		u := k.theta[j] / t
		if j%2 == 0 {
			s += n * math.Log(math.Sinh(u))
		} else {
			s -= n * math.Log(math.Cosh(u))
		}
	}
	return idealScale * s
}

// setReference sets the integration constants from the tabulated n01 and n02, which put enthalpy and entropy of the
// pure ideal gas to zero at 298.15 K and 101.325 kPa; the tables leave out the density of that state and R*/R.
func (k *component) setReference(n01, n02 float64) {
	d0 := referenceP / (gasConstant * referenceT)
	k.a1 = idealScale*n01 - math.Log(d0)
	k.a2 = idealScale*(n02+referenceT) - referenceT
}
