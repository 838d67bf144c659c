package passage

import (
	"fmt"
	"math"

	"lapwing/internal/dsp"
)

// spectra holds the spectrum of the first difference of every stretch.
type spectra struct {
	rate, shaft float64 // Hz
	step        float64 // Hz per bin
	power       [][]float64
}

const perOctave = 16 // bins of the log spectrum

// newSpectra takes every stretch under one Hann window as long as itself, or the next shorter length that transforms
// fast: 3 % at most.
func newSpectra(rate float64, list []Stretch) (*spectra, error) {
	least := math.MaxInt
	for _, s := range list {
		least = min(least, len(s.X)-1)
	}
	n := least &^ 1
	for n > 8 && dsp.FastLength(n) != n {
		n -= 2
	}
	w, err := dsp.NewWelch(rate, n)
	if err != nil {
		return nil, err
	}
	s := &spectra{rate: rate, shaft: 2 * rate / float64(len(list[0].X)), step: w.Step()}
	if s.hi() < 1.5*s.lo() {
		return nil, fmt.Errorf("%g samples a second leave no room above the shaft's harmonics", rate)
	}
	d := make([]float64, n)
	for _, st := range list {
		for i := range d {
			d[i] = st.X[i+1] - st.X[i]
		}
		p := make([]float64, w.Bins())
		w.PSD(p, d)
		s.power = append(s.power, p)
	}
	return s, nil
}

// lo and hi bound the frequency that is looked for.
func (s *spectra) lo() float64 { return math.Max(lowest, leastOrders*s.shaft) }
func (s *spectra) hi() float64 { return highestShare * s.rate }

// logSpectrum is ln S in bins of 1/16 octave: the mean of the logarithms of the raw bins in each.
type logSpectrum struct {
	s      *spectra
	lnF, y []float64
	first  []int // raw bins of each bin, [first, first of the next)
}

// median gives the median over every n-th stretch, beginning with the i-th.
func (s *spectra) median(i, n int) *logSpectrum {
	var vals []float64
	lnS := make([]float64, len(s.power[0]))
	for k := 1; k < len(lnS); k++ {
		vals = vals[:0]
		for j := i; j < len(s.power); j += n {
			vals = append(vals, s.power[j][k])
		}
		lnS[k] = dsp.MedianInPlace(vals)
	}
	noise := s.whiteNoise(lnS)
	for k := 1; k < len(lnS); k++ {
		lnS[k] = math.Log(math.Max(lnS[k]-noise*s.ofDifference(k), lnS[k]/8))
	}
	out := &logSpectrum{s: s}
	edge, end := s.lo()/span, 0
	for edge < s.hi()*span {
		next := edge * math.Exp2(1./perOctave)
		a, b := int(math.Ceil(edge/s.step)), int(math.Ceil(next/s.step))
		edge = next
		if a < 1 || b <= a || b > len(lnS) {
			continue
		}
		sum := 0.0
		for _, v := range lnS[a:b] {
			sum += v
		}
		out.lnF = append(out.lnF, math.Log(s.step*float64(a+b-1)/2))
		out.y = append(out.y, sum/float64(b-a))
		out.first = append(out.first, a)
		end = b
	}
	out.first = append(out.first, end)
	return out
}

// ofDifference is what the first difference makes of white noise of unit power at raw bin k.
func (s *spectra) ofDifference(k int) float64 {
	h := 2 * math.Sin(math.Pi*s.step*float64(k)/s.rate)
	return h * h
}

// whiteNoise is the power of the converter's and the transducer's own noise, from the top of the band, where next to
// nothing of the cycle is left.
func (s *spectra) whiteNoise(power []float64) float64 {
	var vals []float64
	for k := int(.3 * s.rate / s.step); k < int(.45*s.rate/s.step) && k < len(power); k++ {
		vals = append(vals, power[k]/s.ofDifference(k))
	}
	return dsp.MedianInPlace(vals)
}

// span is how far on each side of f₀ the spectrum is fitted.
const span = 2.2

// peak is one trial resonance.
type peak struct{ hz, q, fall float64 }

// try fits ln S = quadratic in ln f − ln[(1 − u²)² + (u/Q)²] around hz and gives by how much the variance falls against
// the quadratic alone; −Inf where there is too little spectrum.
func (l *logSpectrum) try(hz, q float64) float64 {
	lo, hi := 0, len(l.lnF)
	mid := math.Log(hz)
	for lo < hi && l.lnF[lo] < mid-math.Log(span) {
		lo++
	}
	for hi > lo && l.lnF[hi-1] > mid+math.Log(span) {
		hi--
	}
	if hi-lo < perOctave {
		return math.Inf(-1)
	}
	var xs, ws [3 * perOctave]float64
	x, with := xs[:0], ws[:0]
	for i := lo; i < hi; i++ {
		x = append(x, l.lnF[i]-mid)
		product, n := 1.0, 0 // a logarithm a bin, not one a raw bin
		for k := l.first[i]; k < l.first[i+1]; k += 1 + (l.first[i+1]-l.first[i])/8 {
			u := l.s.step * float64(k) / hz
			product *= (1-u*u)*(1-u*u) + u*u/(q*q)
			n++
		}
		with = append(with, l.y[i]+math.Log(product)/float64(n))
	}
	return variance(x, l.y[lo:hi]) - variance(x, with)
}

// variance is that of y about the best parabola in x.
func variance(x, y []float64) float64 {
	var m [3][4]float64
	for i, v := range x {
		c := [3]float64{1, v, v * v}
		for a := range c {
			for b := range c {
				m[a][b] += c[a] * c[b]
			}
			m[a][3] += c[a] * y[i]
		}
	}
	for a := range m { // Gauss; the moments of a symmetric interval are well conditioned
		for b := a + 1; b < 3; b++ {
			f := m[b][a] / m[a][a]
			for k := a; k < 4; k++ {
				m[b][k] -= f * m[a][k]
			}
		}
	}
	c2 := m[2][3] / m[2][2]
	c1 := (m[1][3] - m[1][2]*c2) / m[1][1]
	c0 := (m[0][3] - m[0][2]*c2 - m[0][1]*c1) / m[0][0]
	ss := 0.0
	for i, v := range x {
		r := y[i] - c0 - v*(c1+v*c2)
		ss += r * r
	}
	return ss / float64(len(x))
}

// best searches all frequencies.
func (l *logSpectrum) best() peak {
	top := peak{fall: math.Inf(-1)}
	for hz := l.s.lo(); hz <= l.s.hi(); hz *= math.Exp2(1. / 32) {
		for q := leastQ; q <= mostQ; q *= 1.35 {
			if f := l.try(hz, q); f > top.fall {
				top = peak{hz, q, f}
			}
		}
	}
	return l.refine(top, 1./32, .3)
}

// near searches within a fifth of an octave of a frequency.
func (l *logSpectrum) near(hz float64) peak {
	top := peak{hz: hz, q: leastQ, fall: math.Inf(-1)}
	for d := -.2; d <= .2; d += 1. / 32 {
		for q := leastQ; q <= mostQ; q *= 1.35 {
			if f := l.try(hz*math.Exp2(d), q); f > top.fall {
				top = peak{hz * math.Exp2(d), q, f}
			}
		}
	}
	return l.refine(top, 1./32, .3)
}

// refine walks to the top by halving steps in log frequency (octaves) and log Q.
func (l *logSpectrum) refine(p peak, octave, lnQ float64) peak {
	if math.IsInf(p.fall, -1) {
		return p
	}
	for octave > 1e-4 {
		moved := false
		for _, d := range [4][2]float64{{octave, 0}, {-octave, 0}, {0, lnQ}, {0, -lnQ}} {
			hz, q := p.hz*math.Exp2(d[0]), min(max(p.q*math.Exp(d[1]), leastQ), mostQ)
			if f := l.try(hz, q); f > p.fall {
				p, moved = peak{hz, q, f}, true
			}
		}
		if !moved {
			octave, lnQ = octave/2, lnQ/2
		}
	}
	return p
}
