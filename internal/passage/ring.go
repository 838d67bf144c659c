package passage

import "math"

const (
	ringPeriods = 4.0 // of the passage that are fitted after an opening
	ringLeast   = 1.5 // periods without which an opening tells nothing
	ringTurn    = .1  // share of a turn after which the next event of the same end may come: 36°
	ringMost    = 48  // openings used
	ringReach   = .10 // share by which the spectrum may be off
)

// ring finds frequency and Q from what rings after the openings: a cubic for the cycle and a damped sine for the passage, fitted to
// all openings together around hz. Not ok when too few openings show it.
func ring(rate float64, list []Stretch, hz float64) (f0, q float64, ok bool) {
	period := rate / hz
	length := int(math.Min(ringPeriods*period, ringTurn*float64(len(list[0].X))/2))
	if float64(length) < ringLeast*period || length < 16 {
		return 0, 0, false
	}
	var seen [][]float64
	for _, s := range list {
		for _, at := range s.Opened {
			from := int(math.Ceil(at + period/2)) // the blow itself is over
			if from >= 0 && from+length <= len(s.X) && len(seen) < ringMost {
				seen = append(seen, s.X[from:from+length])
			}
		}
	}
	if len(seen) < LeastStretches {
		return 0, 0, false
	}
	// A coarse grid, then halving steps.
	left := math.Inf(1)
	for d := -ringReach; d < ringReach+.001; d += .01 {
		for t := leastQ; t <= mostQ; t *= 1.25 {
			if r := ringLeft(seen, rate, hz*(1+d), t); r < left {
				left, f0, q = r, hz*(1+d), t
			}
		}
	}
	for df, dq := .005, .1; df > 2e-4; df, dq = df/2, dq/2 {
		for moved := true; moved; {
			moved = false
			for _, d := range [4][2]float64{{df, 0}, {-df, 0}, {0, dq}, {0, -dq}} {
				f, t := f0*(1+d[0]), q*math.Exp(d[1])
				if t < leastQ || t > mostQ {
					continue
				}
				if r := ringLeft(seen, rate, f, t); r < left {
					left, f0, q, moved = r, f, t, true
				}
			}
		}
	}
	return f0, q, math.Abs(f0/hz-1) < ringReach+.005 && q > leastQ*1.05 && q < mostQ/1.05
}

// ringLeft is the sum of squares that cubic and damped sine leave. The columns are the same for all openings: they
// are made orthonormal once, and every opening is projected.
func ringLeft(seen [][]float64, rate, hz, q float64) float64 {
	n := len(seen[0])
	w := 2 * math.Pi * hz / rate
	damped := w * math.Sqrt(math.Max(1-1/(4*q*q), 0))
	var col [6][]float64
	for c := range col {
		col[c] = make([]float64, n)
	}
	for i := range n {
		x := 2*float64(i)/float64(n-1) - 1
		e := math.Exp(-w / (2 * q) * float64(i))
		sin, cos := math.Sincos(damped * float64(i))
		for c, v := range [6]float64{1, x, x * x, x * x * x, e * sin, e * cos} {
			col[c][i] = v
		}
	}
	for c := range col { // Gram-Schmidt, twice for good measure
		for range 2 {
			for b := range c {
				axpy(col[c], -dot(col[c], col[b]), col[b])
			}
		}
		s := 1 / math.Sqrt(dot(col[c], col[c]))
		for i := range col[c] {
			col[c][i] *= s
		}
	}
	left := 0.0
	y := make([]float64, n)
	for _, x := range seen {
		mean := 0.0
		for _, v := range x {
			mean += v / float64(n)
		}
		for i, v := range x {
			y[i] = v - mean
		}
		left += dot(y, y)
		for c := range col {
			d := dot(y, col[c])
			left -= d * d
		}
	}
	return left
}

func dot(a, b []float64) (s float64) {
	for i, v := range a {
		s += v * b[i]
	}
	return s
}

func axpy(dst []float64, f float64, x []float64) {
	for i, v := range x {
		dst[i] += f * v
	}
}
