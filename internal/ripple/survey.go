package ripple

import (
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"

	"lapwing/internal/dsp"
	"lapwing/internal/frame"
)

// What a survey must have before its numbers are trusted.
const (
	LeastTeeth = 12  // marks a turn; from 6 on two harmonics can be had at all
	LeastTurns = 100 // of a load step
	fewTeeth   = 6
)

// Survey measures the ripple with a toothed wheel: what a map through one mark a turn would miss at every tooth. It is
// fed the frames of a recording and keeps one account per load step.
type Survey struct {
	angle  []float64 // degrees after the wheel's mark 0 of all marks, that one included
	orders int
	solve  *mat.Dense // from the teeth's deviations to constant, sin and cos coefficients
	recent []*frame.Frame
	curve  dsp.Curve
	steps  []*account
}

// account is what one load step gave. Deviations are degrees, by tooth.
type account struct {
	step   int
	rpm    []float64
	h      []Harmonics
	sum    []float64 // of the deviations left after each turn's own harmonics
	square []float64
	whole  []float64 // of the deviations themselves
}

// NewSurvey takes the angles, in degrees after the mark that opens a turn, of the further marks (frame.Wheel.Angles).
func NewSurvey(inner []float64) (*Survey, error) {
	s := &Survey{angle: append([]float64{0}, inner...)}
	n := len(s.angle)
	if n < fewTeeth {
		return nil, fmt.Errorf("ripple: %d marks a turn: two harmonics need at least %d", n, fewTeeth)
	}
	s.orders = Orders
	if n < LeastTeeth {
		s.orders = 2
	}
	a := mat.NewDense(n, 1+2*s.orders, nil)
	for i, deg := range s.angle {
		if i > 0 && !(deg > s.angle[i-1]) || !(deg < 360) {
			return nil, fmt.Errorf("ripple: tooth angles are not increasing within 0 to 360")
		}
		a.Set(i, 0, 1)
		for o := 1; o <= s.orders; o++ {
			sin, cos := math.Sincos(float64(o) * deg * math.Pi / 180)
			a.Set(i, 2*o-1, sin)
			a.Set(i, 2*o, cos)
		}
	}
	s.solve = new(mat.Dense)
	if err := s.solve.Solve(a, identity(n)); err != nil {
		return nil, fmt.Errorf("ripple: these teeth do not resolve the harmonics: %w", err)
	}
	return s, nil
}

func identity(n int) *mat.Dense {
	d := mat.NewDense(n, n, nil)
	for i := range n {
		d.Set(i, i, 1)
	}
	return d
}

// Add takes the next frame, with the load step in force. A turn counts when it and its three neighbours are good and
// have all their teeth.
func (s *Survey) Add(f *frame.Frame, step int) {
	if n := len(s.recent); n > 0 && (f.Turn != s.recent[n-1].Turn+1 || f.Mark0 != s.recent[n-1].Mark1) {
		s.recent = s.recent[:0]
	}
	if !f.Good() || !whole(f.Inner, len(s.angle)-1) {
		s.recent = s.recent[:0]
		return
	}
	s.recent = append(s.recent, &frame.Frame{Turn: f.Turn, Mark0: f.Mark0, Mark1: f.Mark1, Inner: append([]float64(nil), f.Inner...)})
	if len(s.recent) < 4 {
		return
	}
	s.turn(s.account(step))
	s.recent = append(s.recent[:0], s.recent[1:]...)
}

func whole(inner []float64, n int) bool {
	for _, p := range inner {
		if math.IsNaN(p) {
			return false
		}
	}
	return len(inner) == n
}

func (s *Survey) account(step int) *account {
	i := 0
	for i < len(s.steps) && s.steps[i].step < step {
		i++
	}
	if i == len(s.steps) || s.steps[i].step != step {
		n := len(s.angle)
		a := &account{step: step, sum: make([]float64, n), square: make([]float64, n), whole: make([]float64, n)}
		s.steps = append(s.steps[:i], append([]*account{a}, s.steps[i:]...)...)
	}
	return s.steps[i]
}

// turn works out the second of the four recent revolutions. The angle that a map through one mark a turn gives to a
// tooth, less the tooth's own, is φ(θ) − θ of the ripple up to a constant: −Σ (aₙ/n) sin(nθ − pₙ), the very form in
// which turn takes the ripple out again.
func (s *Survey) turn(a *account) {
	ref := math.Floor(s.recent[1].Mark0)
	var deg, pos [5]float64
	for i, f := range s.recent {
		deg[i], pos[i] = 360*float64(i-1), f.Mark0-ref
	}
	deg[4], pos[4] = 1080, s.recent[3].Mark1-ref
	if s.curve.FitSpline(pos[:], deg[:]) != nil { // angle over time: no inversion needed
		return
	}
	n := len(s.angle)
	y := mat.NewVecDense(n, nil)
	hint := 0
	for i, inner := range s.recent[1].Inner {
		phi, _ := s.curve.At(inner-ref, &hint)
		y.SetVec(i+1, phi-s.angle[i+1])
	}
	var c mat.VecDense
	c.MulVec(s.solve, y)
	var h Harmonics
	for o := 1; o <= s.orders; o++ { // −(a/n)(sin nθ cos p − cos nθ sin p)
		h[o-1] = complex(-c.AtVec(2*o-1), c.AtVec(2*o)) * complex(float64(o)*math.Pi/180, 0)
	}
	a.h = append(a.h, h)
	a.rpm = append(a.rpm, (s.recent[1].Mark1 - s.recent[1].Mark0))
	for i, at := range s.angle {
		fit := c.AtVec(0)
		for o := 1; o <= s.orders; o++ {
			sin, cos := math.Sincos(float64(o) * at * math.Pi / 180)
			fit += c.AtVec(2*o-1)*sin + c.AtVec(2*o)*cos
		}
		left := y.AtVec(i) - fit
		a.sum[i] += left
		a.square[i] += left * left
		a.whole[i] += y.AtVec(i)
	}
}

// Found is the ripple of one load step. Amplitudes are fractions of the mean speed.
type Found struct {
	Step    int
	Turns   int
	Samples float64 // of a turn, median
	Spread  float64 // of the turn's length, (largest − least)/median
	Mean    Harmonics
	Scatter [Orders]float64 // robust σ of |aₙ exp(ipₙ)| about the mean, turn by turn, per component
	Orders  int             // how many of them are measured

	Pitch  float64   // degrees, σ of the teeth's fixed errors, from what no harmonic up to Orders explains
	Jitter float64   // degrees, σ of one tooth from turn to turn
	Teeth  []float64 // degrees, the fixed error of each tooth as far as it is told apart from ripple
}

// ByPitch is the amplitude that the teeth's fixed errors feign in harmonic n (from 1): a random error of σ degrees on N
// teeth has √(2/N)·σ in any one order, and aₙ is n times the angle.
func (f *Found) ByPitch(n int) float64 {
	return float64(n) * f.Pitch * math.Sqrt(2/float64(len(f.Teeth))) * math.Pi / 180
}

// Error is the σ of aₙ: the scatter of the mean, and what the teeth feign.
func (f *Found) Error(n int) float64 {
	return math.Hypot(f.Scatter[n-1]/math.Sqrt(float64(f.Turns)), f.ByPitch(n))
}

// Found gives the accounts by load step.
func (s *Survey) Found() (out []Found) {
	n := float64(len(s.angle))
	for _, a := range s.steps {
		f := Found{Step: a.step, Turns: len(a.h), Orders: s.orders, Samples: dsp.Median(a.rpm),
			Spread: (dsp.Quantile(a.rpm, 1) - dsp.Quantile(a.rpm, 0)) / dsp.Median(a.rpm)}
		re, im := make([]float64, len(a.h)), make([]float64, len(a.h))
		for o := range s.orders {
			for i, h := range a.h {
				re[i], im[i] = real(h[o]), imag(h[o])
			}
			f.Mean[o] = complex(dsp.Median(re), dsp.Median(im))
			f.Scatter[o] = dsp.MADToSigma * math.Max(dsp.MAD(re), dsp.MAD(im))
		}
		turns, jitter := float64(len(a.h)), 0.0
		for i := range a.sum {
			mean := a.sum[i] / turns
			f.Teeth = append(f.Teeth, mean)
			f.Pitch += mean * mean
			jitter += a.square[i]/turns - mean*mean
		}
		free := n - float64(1+2*s.orders)
		f.Pitch, f.Jitter = math.Sqrt(f.Pitch/free), math.Sqrt(math.Max(jitter, 0)/free)
		out = append(out, f)
	}
	return out
}

// Moved turns harmonics that count from one mark into those that count from another, offset degrees after it.
func (h Harmonics) Moved(offset float64) Harmonics {
	for i := range h { // n(θ+offset) − p = nθ − (p − n·offset)
		h[i] *= cmplx.Rect(1, -float64(i+1)*offset*math.Pi/180)
	}
	return h
}
