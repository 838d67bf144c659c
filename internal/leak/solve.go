package leak

import "math"

// unknowns of the fit after the five areas.
const (
	phase = Paths + iota
	zeroHE
	zeroCE
	unknowns
)

// normal is the least-squares problem as its normal equations. With nine columns of like size their condition is no
// concern (the singular values span four decades at most).
type normal struct {
	a   [unknowns][unknowns]float64 // Σ x xᵀ
	b   [unknowns]float64           // Σ x y
	yy  float64                     // Σ y²
	n   int
	use [unknowns]bool
}

// addRows adds the points of one stroke; col says which unknown each of its columns belongs to, in rising order.
func (q *normal) addRows(col [sUnknowns]int, rows [][sUnknowns]float64, y []float64) {
	var a [sUnknowns][sUnknowns]float64
	var b [sUnknowns]float64
	yy := 0.0
	for j := range rows {
		x, y := &rows[j], y[j]
		for i := range x {
			for k := range i + 1 {
				a[i][k] += x[i] * x[k]
			}
			b[i] += x[i] * y
		}
		yy += y * y
	}
	for i, u := range col {
		if !q.use[u] {
			continue
		}
		for k := range i + 1 {
			if q.use[col[k]] {
				q.a[u][col[k]] += a[i][k]
			}
		}
		q.b[u] += b[i]
	}
	q.yy += yy
	q.n += len(rows)
}

// solution of a problem; unused unknowns are zero.
type solution struct {
	x  [unknowns]float64
	ss float64 // Σ residual² of the data, priors left out

	l     [unknowns][unknowns]float64 // Cholesky factor of the scaled normal matrix
	scale [unknowns]float64           // of its columns; zero for an unused unknown
}

// variance is an unknown's for unit noise: the diagonal of the inverse of the normal matrix, the square of a column of
// the inverse factor.
func (s *solution) variance(u int) float64 {
	var col [unknowns]float64
	col[u] = 1 / s.l[u][u]
	sum := col[u] * col[u]
	for i := u + 1; i < unknowns; i++ {
		v := 0.0
		for k := u; k < i; k++ {
			v -= s.l[i][k] * col[k]
		}
		col[i] = v / s.l[i][i]
		sum += col[i] * col[i]
	}
	return sum * s.scale[u] * s.scale[u]
}

// leastPivot is the share of a column's square that must not be explained by the columns before it.
const leastPivot = 1e-9

// solve adds to each unknown a prior of precision prior[i] (1/variance, in units of the noise variance) centred on
// centre[i], and solves by Cholesky after scaling every column to length one. Not ok: two columns are the same.
func (q *normal) solve(prior, centre *[unknowns]float64) (s solution, ok bool) {
	scale, l := &s.scale, &s.l
	for i := range unknowns {
		if !q.use[i] {
			continue
		}
		d := q.a[i][i] + prior[i]
		if !(d > 0) || math.IsInf(d, 0) {
			return s, false
		}
		scale[i] = 1 / math.Sqrt(d)
	}
	for i := range unknowns {
		if !q.use[i] {
			l[i][i] = 1
			continue
		}
		for j := 0; j <= i; j++ {
			v := 0.0
			if q.use[j] {
				v = q.a[i][j] * scale[i] * scale[j]
			}
			if i == j {
				v = 1
			}
			for k := range j {
				v -= l[i][k] * l[j][k]
			}
			if i != j {
				l[i][j] = v / l[j][j]
				continue
			}
			if !(v >= leastPivot) {
				return s, false
			}
			l[i][i] = math.Sqrt(v)
		}
	}
	var z [unknowns]float64
	for i := range unknowns {
		if q.use[i] {
			z[i] = (q.b[i] + prior[i]*centre[i]) * scale[i]
		}
		for k := range i {
			z[i] -= l[i][k] * z[k]
		}
		z[i] /= l[i][i]
	}
	for i := unknowns - 1; i >= 0; i-- {
		for k := i + 1; k < unknowns; k++ {
			z[i] -= l[k][i] * z[k]
		}
		z[i] /= l[i][i]
	}
	for i := range unknowns {
		s.x[i] = z[i] * scale[i]
	}
	s.ss = q.yy
	for i := range unknowns {
		s.ss -= 2 * s.x[i] * q.b[i]
		for j := range unknowns {
			s.ss += s.x[i] * s.x[j] * q.a[max(i, j)][min(i, j)]
		}
	}
	s.ss = max(s.ss, 0)
	return s, true
}
