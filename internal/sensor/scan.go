package sensor

import (
	"math"

	"lapwing/internal/dsp"
)

// parts is how many stretches a turn is looked at in: the quietest ones show the noise without the valves.
const parts = 32

// scan is what one pass over one turn of one channel shows. Codes throughout.
type scan struct {
	n              int
	min, max       int32
	mean, rms      float64 // rms about the mean
	rough          float64 // mean square of first differences over twice the variance: 0 smooth .. 1 white .. 2
	kurtosis       float64 // of the first differences; 3 when they are normal
	quiet          float64 // white noise, rms, in the quietest stretches, from second differences
	white          float64 // the same over the whole turn
	run            int     // longest stretch of one code, samples
	top, bottom    int     // longest stretch at the highest and at the lowest code (see railShare), samples
	first          float64 // share of the variance in the first harmonic of the turn
	peak           float64 // where that harmonic peaks, degrees after the frame's mark
	railHi, railLo int32   // codes of top and bottom
	flats          [2]shelf
}

// shelf is the quietest stretch of two parts at an extreme, high or low.
type shelf struct {
	level float64 // code, mean
	reach float64 // codes from its least to its greatest
	noise float64 // white, rms; infinite when no stretch of this length stays near the extreme
}

// railShare is how near to the extreme a sample counts as standing at the rail, of the peak-to-peak value: an
// amplifier that saturates is not quite as steady as a converter at its end.
const railShare = 1e-4

// take scans x, the samples of one turn; least 64 of them.
func (s *scan) take(x []int32) {
	*s = scan{n: len(x), min: x[0], max: x[0]}
	var m dsp.Moments // about the first code: no cancellation far from zero
	m.Begin(x)
	var sum, sdd float64
	var means, white [parts]float64
	var tops, bottoms [parts]int32
	for k := range parts {
		from, to := k*len(x)/parts, (k+1)*len(x)/parts
		p := m.Part(to)
		bottoms[k], tops[k] = p.Least, p.Most
		s.min, s.max = min(s.min, p.Least), max(s.max, p.Most)
		n := float64(to - from)
		sum += p.Sum
		sdd += p.Bent
		means[k], white[k] = p.Sum/n, p.Bent/n/6 // a second difference of white noise has six times its variance
	}
	s.run = m.Longest()
	n := float64(len(x))
	s.mean = m.Base() + sum/n
	v := max(0, m.Square()/n-sum/n*(sum/n))
	s.rms = math.Sqrt(v)
	if sd := m.Two(); v > 0 && sd > 0 {
		s.rough = sd / n / (2 * v)
		s.kurtosis = n * m.Four() / (sd * sd)
	}
	s.quiet, s.white = math.Sqrt(third(&white)), math.Sqrt(sdd/n/6)
	s.rails(x, &bottoms, &tops)
	s.shelves(m.Base(), &bottoms, &tops, &means, &white)
	s.harmonic(&means, v)
}

// shelves finds the quietest neighbours among the parts that stay near an extreme.
func (s *scan) shelves(base float64, bottoms, tops *[parts]int32, means, white *[parts]float64) {
	near := railSame * (float64(s.max) - float64(s.min))
	for side := range s.flats {
		q := shelf{level: math.NaN(), reach: math.NaN(), noise: math.Inf(1)}
		for k := range parts - 1 {
			hi, lo := float64(min(tops[k], tops[k+1])), float64(max(bottoms[k], bottoms[k+1]))
			if side == 0 && hi < float64(s.max)-near || side == 1 && lo > float64(s.min)+near {
				continue
			}
			if n := math.Sqrt(max(white[k], white[k+1])); n < q.noise {
				q = shelf{base + (means[k]+means[k+1])/2, float64(max(tops[k], tops[k+1])) - float64(min(bottoms[k], bottoms[k+1])), n}
			}
		}
		s.flats[side] = q
	}
}

// third is the third smallest of a turn's parts: steadier than the smallest, and still away from the valves.
func third(w *[parts]float64) float64 {
	a, b, c := math.Inf(1), math.Inf(1), math.Inf(1)
	for _, v := range w {
		switch {
		case v < a:
			a, b, c = v, a, b
		case v < b:
			b, c = v, b
		case v < c:
			c = v
		}
	}
	return c
}

// rails finds the longest stretches at both extremes. Given the least and the greatest code of each part, it looks only
// at the parts that reach an extreme.
func (s *scan) rails(x []int32, bottoms, tops *[parts]int32) {
	near := int64(railShare * (float64(s.max) - float64(s.min)))
	hi, lo := int32(int64(s.max)-near), int32(int64(s.min)+near)
	up, down := 0, 0
	for k := range parts {
		if tops[k] < hi && bottoms[k] > lo {
			up, down = 0, 0
			continue
		}
		for _, v := range x[k*len(x)/parts : (k+1)*len(x)/parts] {
			if v >= hi {
				up++
				s.top = max(s.top, up)
			} else {
				up = 0
			}
			if v <= lo {
				down++
				s.bottom = max(s.bottom, down)
			} else {
				down = 0
			}
		}
	}
	s.railHi, s.railLo = s.max, s.min
}

// harmonic fits the first harmonic of the turn to the means of its parts.
func (s *scan) harmonic(means *[parts]float64, variance float64) {
	var re, im float64
	for k, m := range means {
		sin, cos := math.Sincos(2 * math.Pi * (float64(k) + 0.5) / parts)
		re += m * cos
		im += m * sin
	}
	re, im = 2*re/parts, 2*im/parts
	s.peak = math.Mod(math.Atan2(im, re)*180/math.Pi+360, 360)
	if variance > 0 {
		s.first = min(1, (re*re+im*im)/2/variance)
	}
}

// outside is the share of samples that read below lo or above hi (codes).
func outside(x []int32, lo, hi float64) float64 {
	n := 0
	for _, v := range x {
		if f := float64(v); f < lo || f > hi {
			n++
		}
	}
	return float64(n) / float64(len(x))
}
