package turn

import "math"

const (
	sigmaSteps   = 0.5 // σ of the Gaussian in grid steps
	sigmaSamples = 0.8 // and at least, in samples
	reachSigmas  = 4.0 // where the Gaussian is cut off
)

// kernel is the Gaussian weight around one position, on the samples; it is laid once and used for every channel.
type kernel struct {
	first      int64 // sample of w[0], relative to the position's origin
	d0         float64
	w          []float64
	s0, s1, s2 float64 // moments of w about the position
}

// width gives σ in samples for the local number of samples per grid step.
func width(perStep float64) float64 { return math.Max(sigmaSteps*perStep, sigmaSamples) }

// lay puts the kernel around a position (samples) with the given σ (samples). The weights are built outwards from the
// nearest sample, each from its neighbour by a ratio that itself falls by a constant factor, which is exact for a
// Gaussian and saves an exponential per sample.
func (k *kernel) lay(pos, sigma float64) {
	near := math.Round(pos)
	reach := int(math.Ceil(reachSigmas * sigma))
	n := 2*reach + 1
	if cap(k.w) < n {
		k.w = make([]float64, n, 2*n)
	}
	k.w = k.w[:n]
	k.first = int64(near) - int64(reach)
	c := 1 / (sigma * sigma)
	d := near - pos
	k.d0 = d - float64(reach)
	q := math.Exp(-c)
	w, right, left := math.Exp(-c*d*d/2), math.Exp(-c*(d+0.5)), math.Exp(-c*(0.5-d))
	k.w[reach] = w
	v := w
	for i := 1; i <= reach; i++ {
		w *= right
		right *= q
		k.w[reach+i] = w
		v *= left
		left *= q
		k.w[reach-i] = v
	}
	k.s0, k.s1, k.s2 = 0, 0, 0
	d = k.d0
	for _, w := range k.w {
		k.s0 += w
		k.s1 += w * d
		k.s2 += w * d * d
		d++
	}
}

// value gives the height, at the kernel's position, of the straight line fitted to x under the weights. x[0] is the
// sample k.first and x has at least len(k.w) samples.
func (k *kernel) value(x []float64) float64 {
	x = x[:len(k.w)]
	base := x[len(x)/2] // differences, so that a large pressure does not eat the digits of its change
	var y0, y1 float64
	d := k.d0
	for i, w := range k.w {
		y := w * (x[i] - base)
		y0 += y
		y1 += y * d
		d++
	}
	return base + (k.s2*y0-k.s1*y1)/(k.s0*k.s2-k.s1*k.s1)
}
