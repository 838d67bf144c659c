package datum

import "math"

type matrix [unknowns][unknowns]float64

// inverse of a symmetric positive definite matrix, by Cholesky after scaling to a unit diagonal.
func (a *matrix) inverse() (inv matrix, ok bool) {
	var scale vector
	var l matrix
	for i := range a {
		if !(a[i][i] > 0) || math.IsInf(a[i][i], 0) {
			return inv, false
		}
		scale[i] = 1 / math.Sqrt(a[i][i])
	}
	for i := range a {
		for j := 0; j <= i; j++ {
			v := a[i][j] * scale[i] * scale[j]
			for k := range j {
				v -= l[i][k] * l[j][k]
			}
			if i != j {
				l[i][j] = v / l[j][j]
				continue
			}
			if !(v > 1e-12) {
				return inv, false
			}
			l[i][i] = math.Sqrt(v)
		}
	}
	for c := range a {
		var z vector
		for i := range a {
			v := 0.0
			if i == c {
				v = 1
			}
			for k := range i {
				v -= l[i][k] * z[k]
			}
			z[i] = v / l[i][i]
		}
		for i := unknowns - 1; i >= 0; i-- {
			for k := i + 1; k < unknowns; k++ {
				z[i] -= l[k][i] * z[k]
			}
			z[i] /= l[i][i]
		}
		for i := range a {
			inv[i][c] = z[i] * scale[i] * scale[c]
		}
	}
	return inv, true
}
