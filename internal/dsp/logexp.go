package dsp

import "math"

// Logs gives the natural logarithms of x, to less than one unit in the last place, with the same bits on every
// processor. dst has the length of x and may be x. What is not positive, finite and normal goes by math.Log.
func Logs(dst, x []float64) { logs(dst, x, hasAVX2) }

// Exps gives the exponentials of x, likewise. What is beyond ±700 goes by math.Exp.
func Exps(dst, x []float64) { exps(dst, x, hasAVX2) }

func logs(dst, x []float64, vectors bool) {
	dst = dst[:len(x)]
	for i := 0; i < len(x); {
		if n := (len(x) - i) &^ 3; vectors && n > 0 {
			i += logsAVX2(&dst[i], &x[i], n)
		}
		for to := min(i+4, len(x)); i < to; i++ { // the rest, or four of which one is not usual
			dst[i] = log(x[i])
		}
	}
}

func exps(dst, x []float64, vectors bool) {
	dst = dst[:len(x)]
	for i := 0; i < len(x); {
		if n := (len(x) - i) &^ 3; vectors && n > 0 {
			i += expsAVX2(&dst[i], &x[i], n)
		}
		for to := min(i+4, len(x)); i < to; i++ {
			dst[i] = exp(x[i])
		}
	}
}

// The forms and coefficients of log and exp are those of FreeBSD's msun (e_log.c, e_exp.c, Sun Microsystems 1993), as in
// Go's math package. logExp holds the constants in the order in which the vectors use them.
var logExp = struct {
	least, most              float64 // of the usual values of log
	l1, l2, l3, l4           float64
	l5, l6, l7, half         float64
	two, ln2Hi, ln2Lo, log2e float64
	e1, e2, e3, e4           float64
	e5, one, limit, magic    float64
	root, bias, exponent     uint64
	whole                    float64
}{
	least: 0x1p-1022, most: math.MaxFloat64,
	l1: 6.666666666666735130e-01, l2: 3.999999999940941908e-01, l3: 2.857142874366239149e-01, l4: 2.222219843214978396e-01,
	l5: 1.818357216161805012e-01, l6: 1.531383769920937332e-01, l7: 1.479819860511658591e-01, half: 0.5,
	two: 2, ln2Hi: 6.93147180369123816490e-01, ln2Lo: 1.90821492927058770002e-10, log2e: math.Log2E,
	e1: 1.66666666666666657415e-01, e2: -2.77777777770155933842e-03, e3: 6.61375632143793436117e-05, e4: -1.65339022054652515390e-06,
	e5: 4.13813679705723846039e-08, one: 1, limit: 700, magic: 0x1p52 + 1023,
	root: 0x3FE6A09E667F3BCD, bias: 1023 << 52, exponent: 0xFFF << 52,
	whole: 0x1p52,
}

func log(x float64) float64 {
	c := &logExp
	if !(x >= c.least && x <= c.most) {
		return math.Log(x)
	}
	// x = 2^k·(1+f), 1+f from √½ to √2
	bits := math.Float64bits(x)
	u := bits - c.root + c.bias
	k := math.Float64frombits(u>>52|math.Float64bits(c.whole)) - c.magic
	f := math.Float64frombits(bits-u&c.exponent+c.bias) - 1
	s := f / (2 + f)
	s2 := s * s
	s4 := s2 * s2
	t1 := s2 * (c.l1 + float64(s4*(c.l3+float64(s4*(c.l5+float64(s4*c.l7))))))
	t2 := s4 * (c.l2 + float64(s4*(c.l4+float64(s4*c.l6))))
	h := float64(0.5*f) * f
	return float64(k*c.ln2Hi) - ((h - (float64(s*(h+(t1+t2))) + float64(k*c.ln2Lo))) - f)
}

func exp(x float64) float64 {
	c := &logExp
	if !(math.Abs(x) <= c.limit) {
		return math.Exp(x)
	}
	k := math.RoundToEven(x * c.log2e)
	hi, lo := x-float64(k*c.ln2Hi), float64(k*c.ln2Lo)
	r := hi - lo
	t := r * r
	d := r - float64(t*(c.e1+float64(t*(c.e2+float64(t*(c.e3+float64(t*(c.e4+float64(t*c.e5)))))))))
	y := 1 - ((lo - float64(r*d)/(2-d)) - hi)
	return y * math.Float64frombits(math.Float64bits(k+c.magic)<<52)
}
