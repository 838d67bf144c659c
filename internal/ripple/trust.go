package ripple

import (
	"fmt"
	"math"
	"math/cmplx"
)

// Limits beyond which a survey's numbers are doubted.
const (
	mostSpread  = 0.05  // of a turn's length within one load step
	mostFeigned = 0.1   // degrees, 95 % half-width of what the teeth's fixed errors feign
	mostJitter  = 0.1   // degrees, σ of one tooth
	mostWander  = 0.3   // degrees, 95 % half-width of a turn's own ripple about the mean
	leastAmp    = 1e-4  // of the mean speed: a harmonic below it does not matter
	alike       = 0.3   // order 1 of two steps differing by less than this share is alike
	stepsMatter = 0.001 // and only where it is at least this strong
)

// halfWidth turns σ of each component of the harmonics into the 95 % half-width of the angles, degrees, with one mark a
// turn: the error Σ (Δaₙ/n)(sin(nθ−pₙ) + sin pₙ) has, over θ and p, √2 the σ of a component; 1.96 of that.
func halfWidth(sigma func(n int) float64, orders int) float64 {
	sum := 0.0
	for n := 1; n <= orders; n++ {
		sum += math.Pow(sigma(n)/float64(n), 2)
	}
	return 1.96 * math.Sqrt2 * math.Sqrt(sum) * 180 / math.Pi
}

// U is the angle uncertainty, degrees, 95 % half-width, that remains with one mark a turn and this ripple: the error of
// the mean and the wander of single turns. What the teeth cannot show (Doubts) is not in it.
func (f *Found) U() float64 {
	return halfWidth(func(n int) float64 { return math.Hypot(f.Error(n), f.Scatter[n-1]) }, f.Orders)
}

// Known reports whether harmonic n is worth writing down: orders 1 and 2 always, others where they stand out.
func (f *Found) Known(n int) bool {
	a := cmplx.Abs(f.Mean[n-1])
	return n <= 2 || n <= f.Orders && a > leastAmp && a > 3*f.Error(n)
}

// Doubts says, a sentence each, why the numbers of a load step should not be trusted; none when they may.
func (f *Found) Doubts() (out []string) {
	add := func(format string, args ...any) { out = append(out, fmt.Sprintf(format, args...)) }
	if f.Turns < LeastTurns {
		add("only %d whole turns in this load step, %d are wanted: record longer", f.Turns, LeastTurns)
	}
	if n := len(f.Teeth); n < LeastTeeth {
		add("%d teeth a turn leave higher harmonics mixed into the lower ones: use a wheel of %d or more", n, LeastTeeth)
	}
	if f.Spread > mostSpread {
		add("the speed moved by %.0f %% in this load step, and the ripple moves with it: hold the speed", 100*f.Spread)
	}
	if u := halfWidth(f.ByPitch, f.Orders); u > mostFeigned {
		add("the teeth stand %.3f° (σ) off their places and may feign ±%.2f°: use a finer wheel, or a strobe tape printed in one piece", f.Pitch, u)
	}
	if f.Jitter > mostJitter {
		add("a tooth's mark jitters by %.3f° (σ) from turn to turn: look at the signal's noise and the sampling rate", f.Jitter)
	}
	if u := halfWidth(func(n int) float64 { return f.Scatter[n-1] }, f.Orders); u > mostWander {
		add("the ripple wanders by ±%.2f° from turn to turn: the load was not steady, or something else turns the shaft unevenly", u)
	}
	sum := 0.0
	for n := 1; n <= f.Orders; n++ {
		a, e := cmplx.Abs(f.Mean[n-1]), f.Error(n)
		sum += a
		if n <= 2 && a > leastAmp && 2*e > a/2 {
			add("harmonic %d is %.3f %% ± %.3f %%: hardly known", n, 100*a, 200*e)
		}
	}
	if sum > mostSpeed {
		add("%.1f %% in all is more than compressor shafts show: is the wheel read rightly, and does it sit fast?", 100*sum)
	}
	return out
}

// Eccentric says what is to be thought of order 1, which a wheel out of centre feigns. One load step cannot tell; over
// several, what stays the same in all of them is the wheel's or the machine's, and only what differs is ripple for sure.
func Eccentric(found []Found) string {
	const hint = "a wheel 0.1 mm out of centre at 100 mm radius reads as 0.1 % of order 1"
	if len(found) < 2 {
		return "order 1 cannot be told from a wheel out of centre (" + hint + "): dial the wheel in, or record another load step or speed as well"
	}
	for i := range found {
		for j := range i {
			a, b := found[i].Mean[0], found[j].Mean[0]
			if cmplx.Abs(a-b) > alike*math.Max(cmplx.Abs(a), cmplx.Abs(b)) {
				return fmt.Sprintf("order 1 differs between load steps %d and %d by %.3f %%, which no wheel out of centre does; the part they share may still be one (%s)",
					found[j].Step, found[i].Step, 100*cmplx.Abs(a-b), hint)
			}
		}
	}
	if cmplx.Abs(found[0].Mean[0]) < stepsMatter {
		return "order 1 is small in every load step"
	}
	return "order 1 is alike in all load steps, as a wheel out of centre makes it (" + hint + "): dial the wheel in before the numbers are used"
}
