package measure

import (
	"math"

	"gonum.org/v1/gonum/dsp/fourier"

	"lapwing/internal/dsp"
)

// Bands of an impact for the eye, Hz.
var showBands = [3][2]float64{{2000, 5000}, {5000, 10000}, {10000, 20000}}

const (
	bandReach  = 0.45 // of the sampling rate: above it a band is not known
	ringFloor  = 0.05 // of the peak: down to where the ring-down is followed
	ringBack   = 3.0  // or down to so many backgrounds
	leastRing  = 6    // points
	whyBand    = "sampling rate too low for this band"
	whyRing    = "rings down in too few samples"
	whyCutBack = "the impact's end is not in this turn"
)

// show measures the figures for the eye, in the energyMs from the onset on the accelerometer that is loudest: crest and
// ring-down follow the length of what they are taken over and scatter by 8 to 60 % (vibration.md section 1), so nothing
// is judged by them.
func (m *Measurer) show(c *throwCtx, at int, b *burst) {
	v := &c.th.Vib[b.loud]
	i := int(place(v, b.onset))
	n := int(energyMs * v.Rate / 1000)
	if i < 0 || i+n > len(v.X) || n < leastEvent {
		for f := vCentroid; f < impactFeatures; f++ {
			c.dst.absent(at+f, whyCutBack)
		}
		return
	}
	x := v.X[i : i+n]
	var s, st float64
	for j, a := range x {
		s += a * a
		st += a * a * float64(j)
	}
	peak, _ := dsp.PeakAbs(x)
	c.dst.set(at+vCentroid, degAt(c.th, b.onset+st/s))
	c.dst.set(at+vCrest, peak/math.Sqrt(s/float64(n)))
	if tau, ok := m.ringDown(x, v.Rate, math.Sqrt(b.loudBack)); ok {
		c.dst.set(at+vRing, tau)
	} else {
		c.dst.absent(at+vRing, whyRing)
	}
	m.bands(c, at, x, v.Rate)
}

// ringDown is the time constant of the amplitude's decay: from the slope of the envelope's logarithm between its peak
// and the floor.
func (m *Measurer) ringDown(x []float64, rate, back float64) (tau float64, ok bool) {
	w := smoothing(rate)
	if cap(m.env) < len(x) {
		m.env = make([]float64, 2*len(x))
	}
	m.env = m.env[:len(x)]
	dsp.Rectify(m.env, x, w)
	peak, at := dsp.PeakAbs(m.env)
	limit := math.Max(ringFloor*peak, ringBack*back)
	var n, st, sl, stt, stl float64
	for j := at; j < len(x) && m.env[j] > limit; j += w {
		t, l := float64(j-at)/rate, math.Log(m.env[j])
		n, st, sl, stt, stl = n+1, st+t, sl+l, stt+t*t, stl+t*l
	}
	if n < leastRing {
		return 0, false
	}
	slope := (n*stl - st*sl) / (n*stt - st*st)
	return -1 / slope, slope < 0
}

// bands gives the mean square in each band, by a Fourier transform of the slice (Parseval).
func (m *Measurer) bands(c *throwCtx, at int, x []float64, rate float64) {
	f := m.spectrum(len(x))
	copy(m.padded, x)
	clear(m.padded[len(x):])
	m.coeff = f.Coefficients(m.coeff, m.padded)
	step := rate / float64(f.Len())
	for k, b := range showBands {
		if b[1] > bandReach*rate {
			c.dst.absent(at+vBandLow+k, whyBand)
			continue
		}
		sum := 0.0
		for i := int(math.Ceil(b[0] / step)); i < int(math.Ceil(b[1]/step)); i++ {
			re, im := real(m.coeff[i]), imag(m.coeff[i])
			sum += re*re + im*im
		}
		c.dst.set(at+vBandLow+k, 10*math.Log10(2*sum/float64(f.Len())/float64(len(x))))
	}
}

// spectrum gives the transform for a slice, padded to a length with small factors, and readies its scratch.
func (m *Measurer) spectrum(n int) *fourier.FFT {
	n = goodLength(n)
	m.padded = sizedTo(m.padded, n)
	if cap(m.coeff) < n/2+1 {
		m.coeff = make([]complex128, n/2+1)
	}
	m.coeff = m.coeff[:n/2+1]
	for _, f := range m.ffts {
		if f.Len() == n {
			return f
		}
	}
	m.ffts = append(m.ffts, fourier.NewFFT(n))
	return m.ffts[len(m.ffts)-1]
}

// goodLength is the next even length that is a product of 2, 3 and 5.
func goodLength(n int) int {
	for n += n % 2; ; n += 2 {
		r := n
		for _, p := range [3]int{2, 3, 5} {
			for r%p == 0 {
				r /= p
			}
		}
		if r == 1 {
			return n
		}
	}
}
