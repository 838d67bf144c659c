package duty

import "math"

// Cusum is a two-sided cumulative-sum test on standardised values: it finds a small lasting shift that no single block
// shows. The zero value is ready.
type Cusum struct {
	Up, Down float64 // both >= 0
}

// The test's constants, in spreads. A large reference value K, since spreads hold the duty model's own error and only
// shifts that matter shall count; values are clipped at CusumClip so that one wild block cannot signal. On independent
// Gaussian blocks the mean run between false signals is RunLength(K, Limit)/2, about 2·10⁷ blocks. Blocks of a machine
// are neither: what was measured on modelled ones stands in DEVELOPERS.md.
const (
	CusumK     = 1.0
	CusumLimit = 8.0
	CusumClip  = 4.0
)

// Step takes one value; NaN changes nothing. It returns the larger side as a share of the limit, with its sign.
func (c *Cusum) Step(z float64) float64 {
	c.step(z, CusumK, CusumLimit)
	return c.Share()
}

func (c *Cusum) step(z, k, limit float64) {
	if math.IsNaN(z) {
		return
	}
	z = math.Max(-CusumClip, math.Min(CusumClip, z))
	// Capped at twice the limit: after a repair it comes back in finite time.
	c.Up = math.Min(2*limit, math.Max(0, c.Up+z-k))
	c.Down = math.Min(2*limit, math.Max(0, c.Down-z-k))
}

// Share is the larger side as a share of the limit, with its sign.
func (c *Cusum) Share() float64 {
	if c.Down > c.Up {
		return -c.Down / CusumLimit
	}
	return c.Up / CusumLimit
}

// Share is the state of a carried test as a share of its limit, signed.
func (t SlowTest) Share() float64 { return (&Cusum{Up: t.Up, Down: t.Down}).Share() }

// RunLength is the mean number of values between false signals of a one-sided test with reference k and limit h, by
// Siegmund's approximation (D. Siegmund, Sequential Analysis, 1985): b = h + 1.166,
//
//	ARL = (e^(2kb) − 2kb − 1) / (2k²)
//
// A two-sided test has half of it.
func RunLength(k, h float64) float64 {
	b := h + 1.166
	return (math.Exp(2*k*b) - 2*k*b - 1) / (2 * k * k)
}
