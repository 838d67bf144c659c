package dsp

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/dsp/fourier"
)

// Welch estimates one-sided power spectral densities: segments of n samples under a periodic Hann window, half
// overlapping, their periodograms averaged. Source: Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70. It owns its
// buffers; one Welch serves one goroutine.
type Welch struct {
	rate float64
	fft  *fourier.FFT
	win  []float64
	seg  []float64
	coef []complex128
	norm float64 // of a doubled squared coefficient, to power per Hz
}

// FastLength gives the smallest length of at least n samples whose only prime factors are 2, 3 and 5. Other lengths
// cost the square of their largest factor (measured: reference/libraries.md section 4).
func FastLength(n int) int {
	for n = max(n, 1); !fastLength(n); n++ {
	}
	return n
}

func fastLength(n int) bool {
	for _, p := range [3]int{2, 3, 5} {
		for n%p == 0 {
			n /= p
		}
	}
	return n == 1
}

// NewWelch prepares spectra of segments of n samples at rate samples per second. n must be even, at least 8, and a
// product of 2, 3 and 5 only.
func NewWelch(rate float64, n int) (*Welch, error) {
	if !(rate > 0) || math.IsInf(rate, 0) {
		return nil, fmt.Errorf("dsp: Welch: rate %g Hz is not positive", rate)
	}
	if n < 8 || n%2 != 0 || !fastLength(n) {
		return nil, fmt.Errorf("dsp: Welch: %d samples are not an even product of 2, 3 and 5 of at least 8; the next is %d", n, FastLength(max(n, 8)+n%2))
	}
	w := &Welch{rate: rate, fft: fourier.NewFFT(n), win: make([]float64, n), seg: make([]float64, n), coef: make([]complex128, n/2+1)}
	var power float64
	for i := range w.win {
		w.win[i] = 0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/float64(n)) // periodic: the spectrum's, not the filter designer's
		power += w.win[i] * w.win[i]
	}
	w.norm = 1 / (rate * power)
	return w, nil
}

// Bins is the number of bins that PSD fills; bin i lies at i·Step Hz.
func (w *Welch) Bins() int { return len(w.coef) }

// Step is the distance of bins in Hz.
func (w *Welch) Step() float64 { return w.rate / float64(len(w.win)) }

// PSD fills dst (Bins long) with the power per Hz of x, in the square of x's unit; the sum times Step is the power of
// what is left of x after its mean is taken out. It gives the number of segments: 0 and nothing in dst when x is shorter than one.
func (w *Welch) PSD(dst, x []float64) (segments int) {
	n := len(w.win)
	if len(dst) != w.Bins() {
		panic("dsp: Welch: dst must have Bins() entries")
	}
	if len(x) < n {
		return 0
	}
	clear(dst)
	var mean float64
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	for from := 0; from+n <= len(x); from += n / 2 {
		for i, v := range x[from : from+n] {
			w.seg[i] = (v - mean) * w.win[i]
		}
		w.fft.Coefficients(w.coef, w.seg)
		for i, c := range w.coef {
			dst[i] += real(c)*real(c) + imag(c)*imag(c)
		}
		segments++
	}
	k := w.norm / float64(segments)
	for i := range dst {
		if i == 0 || i == n/2 { // these two have no mirror image
			dst[i] *= k
		} else {
			dst[i] *= 2 * k
		}
	}
	return segments
}
