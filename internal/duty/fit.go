package duty

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// normal holds weighted normal equations.
type normal struct {
	a [numTerms][numTerms]float64
	b [numTerms]float64
	w float64
}

func (m *normal) add(x *[numTerms]float64, y, w float64) {
	for i := range numTerms {
		wx := w * x[i]
		if wx == 0 {
			continue
		}
		m.b[i] += wx * y
		for j := 0; j <= i; j++ {
			m.a[i][j] += wx * x[j]
		}
	}
	m.w += w
}

func (m *normal) sub(o *normal) (d normal) {
	d = *m
	for i := range numTerms {
		d.b[i] -= o.b[i]
		for j := 0; j <= i; j++ {
			d.a[i][j] -= o.a[i][j]
		}
	}
	d.w -= o.w
	return d
}

// ridge is the weight of the prior "no slope" in turns per scaled unit: it keeps terms that go together from fighting.
const ridge = 0.5

// sym gives the matrix with the ridge on it; terms that are off get a 1 on the diagonal, so that they solve to zero.
func (m *normal) sym() *mat.SymDense {
	s := mat.NewSymDense(numTerms, nil)
	for i := range numTerms {
		for j := 0; j <= i; j++ {
			s.SetSym(i, j, m.a[i][j])
		}
		d := m.a[i][i]
		if i > 0 {
			d += ridge
		}
		if d == ridge || d == 0 {
			d = 1
		}
		s.SetSym(i, i, d)
	}
	return s
}

func (m *normal) solve() (c [numTerms]float64, err error) {
	var ch mat.Cholesky
	if !ch.Factorize(m.sym()) {
		return c, fmt.Errorf("duty: normal equations are not positive definite")
	}
	var v mat.VecDense
	if err := ch.SolveVecTo(&v, mat.NewVecDense(numTerms, append([]float64(nil), m.b[:]...))); err != nil {
		return c, fmt.Errorf("duty: normal equations: %w", err)
	}
	for i := range c {
		c[i] = v.AtVec(i)
	}
	return c, nil
}

func dot(a, b *[numTerms]float64) (s float64) {
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// huber is the corner of Huber's weights in robust standard deviations: 95 % efficiency on Gaussian noise
// (Huber, Robust Statistics, 1981; the constant from memory).
const huber = 1.345

// robust fits y on rows by iterated re-weighting. It returns coefficients, weights and the robust spread of the residuals.
func robust(x [][numTerms]float64, y []float64) (c [numTerms]float64, w []float64, spread float64, err error) {
	n := len(y)
	w = make([]float64, n)
	res := make([]float64, n)
	buf := make([]float64, n)
	for i := range w {
		w[i] = 1
	}
	// Begin at the median: one wild turn must not shape the first weights.
	copy(buf, y)
	slices.Sort(buf)
	c[0] = quantile(buf, 0.5)
	least := 1e-12*math.Max(math.Abs(buf[0]), math.Abs(buf[n-1])) + math.SmallestNonzeroFloat64 // rounding is no spread
	for it := range 30 {
		for i := range y {
			res[i] = y[i] - dot(&c, &x[i])
		}
		if it < 12 { // by then the scale has settled; a moving scale need not converge
			spread = math.Max(madn(res, buf), least)
		}
		if it > 0 {
			for i, r := range res {
				w[i] = 1
				if a := math.Abs(r); a > huber*spread {
					w[i] = huber * spread / a
				}
			}
		}
		var m normal
		for i := range y {
			m.add(&x[i], y[i], w[i])
		}
		next, err := m.solve()
		if err != nil {
			return c, nil, 0, err
		}
		move := 0.0
		for i := range c {
			move = math.Max(move, math.Abs(next[i]-c[i]))
		}
		c = next
		if it > 1 && move <= 1e-4*spread {
			break
		}
	}
	for i := range y {
		res[i] = y[i] - dot(&c, &x[i])
	}
	return c, w, madn(res, buf), nil
}

// madn is the median absolute deviation from the median, scaled to a Gaussian's standard deviation.
func madn(x, buf []float64) float64 {
	buf = buf[:len(x)]
	copy(buf, x)
	slices.Sort(buf)
	m := quantile(buf, 0.5)
	for i, v := range x {
		buf[i] = math.Abs(v - m)
	}
	slices.Sort(buf)
	return 1.4826 * quantile(buf, 0.5)
}

// leverage is xᵀ(XᵀX+R)⁻¹x.
func leverage(inv *[numTerms][numTerms]float64, x *[numTerms]float64) (h float64) {
	for i := range x {
		for j := range x {
			h += x[i] * inv[i][j] * x[j]
		}
	}
	return h
}

func (m *normal) inverse() (inv [numTerms][numTerms]float64, err error) {
	var ch mat.Cholesky
	if !ch.Factorize(m.sym()) {
		return inv, fmt.Errorf("duty: normal equations are not positive definite")
	}
	var s mat.SymDense
	if err := ch.InverseTo(&s); err != nil {
		return inv, fmt.Errorf("duty: normal equations: %w", err)
	}
	for i := range numTerms {
		for j := range numTerms {
			inv[i][j] = s.At(i, j)
		}
	}
	return inv, nil
}
