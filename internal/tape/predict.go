package tape

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
)

// Linear prediction. The samples of a channel are taken in frames; each frame has its own predictor: the polynomial
// ones of order 0 to 3, or a fitted one of order fitOrder with integer coefficients. The predictor bytes hold, for each
// frame, one byte of order, and for a fitted one a byte of shift and its coefficients as 2 bytes BE each.
//
//	residual[i] = x[i] - (sum over j of c[j]*x[i-1-j]) >> shift        modulo 2^32
//
// The first samples of a channel see zeros before them. The fit solves the normal equations of the windowed
// autocorrelation by the Levinson-Durbin recursion; see J. Makhoul, "Linear prediction: a tutorial review",
// Proc. IEEE 63 (1975). Rounding in the fit costs bytes, never counts: the decoder uses the stored integers.
const (
	frameLen  = 4096
	fitOrder  = 12
	fitted    = 255 // the order byte of a fitted predictor
	coefBits  = 13  // magnitude bits of a coefficient
	maxShift  = 15
	polyOrder = 3
)

// polynomial[k] are the coefficients of the predictor that is exact for polynomials of degree below k.
var polynomial = [polyOrder + 1][]int32{{}, {1}, {2, -1}, {3, -3, 1}}

type fitter struct {
	window  []float64 // of frameLen
	tapered []float64
	trial   []int32
}

// residuals gives x's residuals in res and appends the predictor bytes to side.
func (f *fitter) residuals(res []int32, side []byte, x []int32) ([]int32, []byte) {
	res = grown(res, len(x))
	for at := 0; at < len(x); at += frameLen {
		end := min(at+frameLen, len(x))
		order, cost := bestPolynomial(x, at, end)
		predict(res[at:end], x, at, polynomial[order], 0)
		coef, shift, ok := f.fit(x[at:end], cost)
		if ok {
			f.trial = grown(f.trial, end-at)
			predict(f.trial, x, at, coef[:], shift)
			// A fitted predictor must earn its own bytes: 26 bytes in a frame are worth about 1 % of its deviations.
			if magnitude(f.trial) < cost*0.98 {
				copy(res[at:end], f.trial)
				side = append(side, fitted, byte(shift))
				for _, c := range coef {
					side = binary.BigEndian.AppendUint16(side, uint16(int16(c)))
				}
				continue
			}
		}
		side = append(side, byte(order))
	}
	return res, side
}

// restore undoes residuals: x from res, which have the same length.
func restore(x, res []int32, side []byte) error {
	var coef [fitOrder]int32
	for at := 0; at < len(x); at += frameLen {
		end := min(at+frameLen, len(x))
		if len(side) == 0 {
			return errors.New("predictor bytes end early")
		}
		order := side[0]
		side = side[1:]
		var c []int32
		shift := uint(0)
		switch {
		case order <= polyOrder:
			c = polynomial[order]
		case order == fitted:
			if len(side) < 1+2*fitOrder {
				return errors.New("predictor bytes end early")
			}
			if shift = uint(side[0]); shift > maxShift {
				return fmt.Errorf("predictor shift %d", shift)
			}
			for j := range coef {
				coef[j] = int32(int16(binary.BigEndian.Uint16(side[1+2*j:])))
			}
			side, c = side[1+2*fitOrder:], coef[:]
		default:
			return fmt.Errorf("predictor order %d", order)
		}
		for i := at; i < end; i++ {
			x[i] = res[i] + predicted(x, i, c, shift)
		}
	}
	if len(side) != 0 {
		return errors.New("predictor bytes left over")
	}
	return nil
}

// predict writes the residuals of x[at : at+len(res)].
func predict(res []int32, x []int32, at int, c []int32, shift uint) {
	for i := range res {
		res[i] = x[at+i] - predicted(x, at+i, c, shift)
	}
}

func predicted(x []int32, i int, c []int32, shift uint) int32 {
	var sum int64
	if i >= len(c) {
		past := x[i-len(c) : i]
		for j, cj := range c {
			sum += int64(cj) * int64(past[len(past)-1-j])
		}
	} else {
		for j := 0; j < i; j++ {
			sum += int64(c[j]) * int64(x[i-1-j])
		}
	}
	return int32(sum >> shift)
}

// bestPolynomial finds the order whose residuals are smallest in sum, with that sum.
func bestPolynomial(x []int32, at, end int) (order int, cost float64) {
	var sums [polyOrder + 1]float64
	back := func(k int) int32 {
		if at-k < 0 {
			return 0
		}
		return x[at-k]
	}
	p1, p2, p3 := back(1), back(2), back(3)
	for _, v := range x[at:end] {
		d1 := v - p1
		d2 := d1 - (p1 - p2)
		d3 := d2 - (p1 - 2*p2 + p3)
		sums[0] += math.Abs(float64(v))
		sums[1] += math.Abs(float64(d1))
		sums[2] += math.Abs(float64(d2))
		sums[3] += math.Abs(float64(d3))
		p3, p2, p1 = p2, p1, v
	}
	for k, s := range sums {
		if s < sums[order] {
			order = k
		}
	}
	return order, sums[order]
}

func magnitude(res []int32) float64 {
	var s float64
	for _, r := range res {
		s += math.Abs(float64(r))
	}
	return s
}

// fit gives integer coefficients for one frame; not ok when the frame is too short, too plain or cannot be fitted.
func (f *fitter) fit(x []int32, polyCost float64) (c [fitOrder]int32, shift uint, ok bool) {
	n := len(x)
	if n < 8*fitOrder || polyCost < float64(n) { // less than one count a sample: nothing to gain
		return c, 0, false
	}
	f.taper(n)
	f.tapered = grown(f.tapered, n)
	for i, v := range x {
		f.tapered[i] = f.window[i] * float64(v)
	}
	var r [fitOrder + 1]float64
	for lag := range r {
		var s float64
		a, b := f.tapered[lag:], f.tapered[:n-lag]
		for i := range a {
			s += a[i] * b[i]
		}
		r[lag] = s
	}
	a, ok := levinson(&r)
	if !ok {
		return c, 0, false
	}
	return quantised(&a)
}

// taper makes the window for n samples: flat with cosine ends.
func (f *fitter) taper(n int) {
	if len(f.window) == n {
		return
	}
	f.window = grown(f.window, n)
	edge := n / 8
	for i := range f.window {
		f.window[i] = 1
		if d := min(i, n-1-i); d < edge {
			f.window[i] = 0.5 - 0.5*math.Cos(math.Pi*(float64(d)+0.5)/float64(edge))
		}
	}
}

// levinson solves the Toeplitz normal equations for the coefficients of x[i-1], x[i-2] …
func levinson(r *[fitOrder + 1]float64) (a [fitOrder]float64, ok bool) {
	e := r[0] * (1 + 1e-12)
	if !(e > 0) {
		return a, false
	}
	for m := range fitOrder {
		k := r[m+1]
		for j := range m {
			k -= a[j] * r[m-j]
		}
		k /= e
		prev := a
		a[m] = k
		for j := range m {
			a[j] = prev[j] - k*prev[m-1-j]
		}
		if e *= 1 - k*k; !(e > 0) {
			return a, false
		}
	}
	return a, true
}

// quantised rounds the coefficients to coefBits, handing each rounding error on to the next.
func quantised(a *[fitOrder]float64) (c [fitOrder]int32, shift uint, ok bool) {
	var top float64
	for _, v := range a {
		top = math.Max(top, math.Abs(v))
	}
	if !(top > 0) || math.IsInf(top, 0) {
		return c, 0, false
	}
	_, exp := math.Frexp(top) // top < 2^exp
	s := coefBits - exp
	if s < 0 {
		return c, 0, false
	}
	s = min(s, maxShift)
	var carry float64
	for j, v := range a {
		carry += v * float64(int64(1)<<s)
		q := math.Round(carry)
		q = math.Max(-(1<<coefBits - 1), math.Min(1<<coefBits-1, q))
		c[j] = int32(q)
		carry -= q
	}
	return c, uint(s), true
}
