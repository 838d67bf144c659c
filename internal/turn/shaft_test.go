package turn

import (
	"math"

	"lapwing/internal/frame"
)

// shaft is a shaft whose angle is known at every sample: the outside truth of these tests. The angle is integrated
// from w(t)·(1 + Σ a cos(nθ − p)) by Runge-Kutta at the sampling rate.
type shaft struct {
	rate   float64
	theta  []float64 // degrees after the first mark, per sample
	speed  []float64 // degrees per sample
	perRev int
}

func newShaft(rate, seconds float64, rpm func(t float64) float64, ripple []Ripple, marksPerTurn int) *shaft {
	s := &shaft{rate: rate, perRev: marksPerTurn}
	w := func(t, th float64) float64 {
		k := 1.0
		for _, r := range ripple {
			k += r.Amp * math.Cos((float64(r.Order)*th-r.PhaseDeg)*math.Pi/180)
		}
		return 6 * rpm(t) * k / rate
	}
	th := -130.0 // the first mark comes after a while
	for i := range int(rate * seconds) {
		t := float64(i) / rate
		s.theta = append(s.theta, th)
		k1 := w(t, th)
		s.speed = append(s.speed, k1)
		k2 := w(t+0.5/rate, th+k1/2)
		k3 := w(t+0.5/rate, th+k2/2)
		k4 := w(t+1/rate, th+k3)
		th += (k1 + 2*k2 + 2*k3 + k4) / 6
	}
	return s
}

// position gives the sample position of an angle by inverting the cubic through both neighbours and their speeds.
func (s *shaft) position(deg float64) float64 {
	lo, hi := 0, len(s.theta)-1
	for hi-lo > 1 {
		if m := (lo + hi) / 2; s.theta[m] <= deg {
			lo = m
		} else {
			hi = m
		}
	}
	d, v0, v1 := s.theta[hi]-s.theta[lo], s.speed[lo], s.speed[hi]
	x := (deg - s.theta[lo]) / d
	for range 5 {
		f := s.theta[lo] + x*(v0+x*(3*d-2*v0-v1+x*(v0+v1-2*d)))
		x -= (f - deg) / (v0 + x*(2*(3*d-2*v0-v1)+3*x*(v0+v1-2*d)))
	}
	return float64(lo) + x
}

// frames cuts the run into frames from revolution 0 on; signal gives the counts of input k at an angle and a sample.
func (s *shaft) frames(inputs int, signal func(k int, deg float64, n int) float64) []*frame.Frame {
	var out []*frame.Frame
	last := s.theta[len(s.theta)-1]
	for rev := 0; float64(rev+1)*360 < last; rev++ {
		f := &frame.Frame{Turn: int64(rev), Mark0: s.position(360 * float64(rev)), Mark1: s.position(360 * float64(rev+1))}
		for m := 1; m < s.perRev; m++ {
			f.Inner = append(f.Inner, s.position(360*(float64(rev)+float64(m)/float64(s.perRev))))
		}
		f.Seq0 = int64(math.Floor(f.Mark0))
		for k := range inputs {
			var c []int32
			for n := f.Seq0; float64(n) < f.Mark1; n++ {
				c = append(c, int32(math.Round(signal(k, s.theta[n], int(n)))))
			}
			f.Counts = append(f.Counts, c)
		}
		out = append(out, f)
	}
	return out
}

func steady(rpm float64) func(float64) float64 { return func(float64) float64 { return rpm } }

// ramp changes by a share of its start per second.
func ramp(rpm, share float64) func(float64) float64 {
	return func(t float64) float64 { return rpm * (1 + share*t) }
}

// run feeds frames and gives clones of all turns.
func run(c *Converter, frames []*frame.Frame) []*Turn {
	var out []*Turn
	keep := func(t *Turn) { out = append(out, t.Clone()) }
	for _, f := range frames {
		c.Add(f, keep)
	}
	c.Flush(keep)
	return out
}
