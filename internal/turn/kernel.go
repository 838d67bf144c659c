package turn

import "math"

const (
	sigmaSteps   = 0.5 // σ of the Gaussian in grid steps
	sigmaSamples = 0.8 // and at least, in samples
	reachSigmas  = 4.0 // where the Gaussian is cut off
	rungs        = 256 // σ is rounded up to exp(i/rungs), by less than 0.4 %:
	roundedUp    = 1.004
)

// kernel is the weight of the samples around one position, for a pressure whose passage is to be undone.
type kernel struct {
	first int64     // sample of h[0], relative to the position's origin
	h     []float64 // weights of the samples in the value; they add up to one

	rung  rung
	g     []float64 // Gaussian of σ = rung.hi at 0, 1 … reach samples
	c     float64   // 1/σ²
	w     []float64 // Gaussian about the position, 1 at the nearest sample, which is w[reach]
	reach int
	d     float64 // nearest sample minus position
}

// width gives σ in samples for the local number of samples per grid step.
func width(perStep float64) float64 { return max(sigmaSteps*perStep, sigmaSamples) }

// gauss readies the Gaussian for σ (samples). The shaft's speed moves little from one grid angle to the next, so σ
// seldom leaves its rung. The weights are built from each other by a ratio that itself falls by a constant factor,
// which is exact for a Gaussian.
func (k *kernel) gauss(sigma float64) {
	if k.rung.has(sigma) {
		return
	}
	k.rung.of(sigma)
	k.c = 1 / (k.rung.hi * k.rung.hi)
	k.reach = reach(k.rung.hi)
	n := 2*k.reach + 1
	if cap(k.w) < n {
		k.w, k.h = make([]float64, n, 2*n), make([]float64, n, 2*n)
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
	for i := 1; i < len(g); i++ {
		pr *= right
		pl *= left
		up[i], down[len(down)-i] = g[i]*pr, g[i]*pl
	}
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
