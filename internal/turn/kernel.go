package turn

import "math"

const (
	sigmaSteps   = 0.5 // σ of the Gaussian in grid steps
	sigmaSamples = 0.8 // and at least, in samples
	reachSigmas  = 4.0 // where the Gaussian is cut off
	rungs        = 256 // σ is rounded up to exp(i/rungs), by less than 0.4 %:
	roundedUp    = 1.004
)

// kernel is the weight of the samples around one position; it is laid once and used for every channel that asks for
// the same.
type kernel struct {
	first int64     // sample of h[0], relative to the position's origin
	h     []float64 // weights of the samples in the value; they add up to one

	lo, hi float64   // the rung: widths lo < σ <= hi have the Gaussian of σ = hi
	g      []float64 // that Gaussian at 0, 1 … reach samples
	c      float64   // 1/σ²

	index []float64 // 0, 1, 2 …, as many as h
	w     []float64 // Gaussian about the position, 1 at the nearest sample, which is w[reach]
	reach int
	d     float64    // nearest sample minus position
	m     [3]float64 // moments of w about the nearest sample
}

// width gives σ in samples for the local number of samples per grid step.
func width(perStep float64) float64 { return math.Max(sigmaSteps*perStep, sigmaSamples) }

// gauss readies the Gaussian for σ (samples). The shaft's speed moves little from one grid angle to the next, so σ
// seldom leaves its rung. The weights are built from each other by a ratio that itself falls by a constant factor,
// which is exact for a Gaussian.
func (k *kernel) gauss(sigma float64) {
	if k.lo < sigma && sigma <= k.hi {
		return
	}
	rung := func(i float64) float64 { return math.Exp(i / rungs) }
	i := math.Ceil(rungs * math.Log(sigma))
	for sigma <= rung(i-1) { // the bounds decide, not the logarithm's last bit
		i--
	}
	for sigma > rung(i) {
		i++
	}
	k.lo, k.hi = rung(i-1), rung(i)
	k.c = 1 / (k.hi * k.hi)
	k.reach = int(math.Ceil(reachSigmas * k.hi))
	n := 2*k.reach + 1
	if cap(k.w) < n {
		k.w, k.h = make([]float64, n, 2*n), make([]float64, n, 2*n)
	}
	for len(k.index) < n {
		k.index = append(k.index, float64(len(k.index)))
	}
	k.w, k.h = k.w[:n], k.h[:n]
	k.g = append(k.g[:0], 1)
	v, ratio, q := 1.0, math.Exp(-k.c/2), math.Exp(-k.c)
	for range k.reach {
		v *= ratio
		ratio *= q
		k.g = append(k.g, v)
	}
}

// lay puts the Gaussian around a position (samples) with the given σ (samples): exp(−(i+d)²c/2) is the Gaussian at i
// times the i-th power of exp(−c d), up to a factor that does not matter.
func (k *kernel) lay(pos, sigma float64) {
	k.gauss(sigma)
	near := math.Round(pos)
	k.first = int64(near) - int64(k.reach)
	k.d = near - pos
	right, left := exponentials(-k.c * k.d)
	up, down, g := k.w[k.reach:], k.w[:k.reach], k.g[:k.reach+1]
	up = up[:len(g)]
	up[0] = 1
	pr, pl := 1.0, 1.0
	m0, m1, m2, f := 1.0, 0.0, 0.0, 0.0
	for i := 1; i < len(g); i++ {
		f++
		pr *= right
		pl *= left
		w, v := g[i]*pr, g[i]*pl
		up[i], down[len(down)-i] = w, v
		even, odd := w+v, f*(w-v)
		m0 += even
		m1 += odd
		m2 += f * f * even
	}
	k.m = [3]float64{m0, m1, m2}
}

// exponentials gives e^z and e^−z. For the usual small z by their common series, which costs a third; it is cut where
// the rest is under 3e-13, and what it leaves out is only a Gaussian that differs by as much.
func exponentials(z float64) (up, down float64) {
	if math.Abs(z) > 0.25 {
		up = math.Exp(z)
		return up, 1 / up
	}
	u := z * z
	even := 1 + u*(1./2)*(1+u*(1./12)*(1+u*(1./30)*(1+u*(1./56))))
	odd := z * (1 + u*(1./6)*(1+u*(1./20)*(1+u*(1./42)*(1+u*(1./72)))))
	return even + odd, even - odd
}

// line makes the weights those of the height, at the kernel's position, of the straight line fitted under the Gaussian.
func (k *kernel) line() {
	s0 := k.m[0] // moments about the position
	s1 := k.m[1] + k.d*s0
	s2 := k.m[2] + k.d*(2*k.m[1]+k.d*s0)
	det := 1 / (s0*s2 - s1*s1)
	b := -s1 * det
	a := s2*det + b*(k.d-float64(k.reach))
	h, index := k.h[:len(k.w)], k.index[:len(k.w)]
	for i, w := range k.w {
		h[i] = w * (a + b*index[i])
	}
}

// value gives the weighted mean. x[0] is the sample k.first and x has at least len(k.h) samples. Four sums run side by
// side, so that none waits for the one before it.
func (k *kernel) value(x []float64) float64 {
	h := k.h
	x = x[:len(h)]
	base := x[len(x)/2] // differences, so that a large pressure does not eat the digits of its change
	var y0, y1, y2, y3 float64
	for len(h) >= 4 && len(x) >= 4 {
		y0 += h[0] * (x[0] - base)
		y1 += h[1] * (x[1] - base)
		y2 += h[2] * (x[2] - base)
		y3 += h[3] * (x[3] - base)
		h, x = h[4:], x[4:]
	}
	for i, w := range h {
		y0 += w * (x[i] - base)
	}
	return base + ((y0 + y1) + (y2 + y3))
}
