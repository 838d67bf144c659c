package gas

import (
	"fmt"
	"math"
)

// Range of the saturation formulas, K: ice from 150 K, liquid from the triple point of water to its critical point.
const (
	coldestIce = 150.0
	tripleT    = 273.16
	tripleP    = 611.657
	criticalT  = 647.096
	criticalP  = 22.064e6
)

// Saturation is the vapour pressure of water, Pa, at T in K. Over liquid: W. Wagner and A. Pruss, J. Phys. Chem. Ref.
// Data 22 (1993) 783, the form of IAPWS SR1-86(1992), coefficients from memory and checked against printed values of
// IAPWS-IF97 in the tests. Over ice: IAPWS R14-08(2011), coefficients from memory and checked against the value that it
// prints for 230 K: a dew point below 0 °C is taken as a frost point. Outside 150 to 647.096 K: ErrRange.
func Saturation(t float64) (float64, error) {
	if !(t >= coldestIce && t <= criticalT) {
		return 0, fmt.Errorf("gas: water at %.2f K is outside its saturation line (150 to 647.096 K): %w", t, ErrRange)
	}
	if t < tripleT {
		x := t / tripleT
		s := -21.2144006*math.Pow(x, 1.0/300) + 27.3203819*math.Pow(x, 1.20666667) - 6.10598130*math.Pow(x, 1.70333333)
		return tripleP * math.Exp(s/x), nil
	}
	u := 1 - t/criticalT
	s := -7.85951783*u + 1.84408259*math.Pow(u, 1.5) - 11.7866497*math.Pow(u, 3) + 22.6807411*math.Pow(u, 3.5) -
		15.9618719*math.Pow(u, 4) + 1.80122502*math.Pow(u, 7.5)
	return criticalP * math.Exp(criticalT/t*s), nil
}

// Moist adds water until the gas at T (K) and p (Pa absolute) has the relative humidity given (0 to 1); at a dew point
// take its temperature, the pressure at which it was stated, and 1. The mole fraction is humidity·saturation/p: water in
// an ideal gas. Real gas under pressure holds more (a few per cent at 1 MPa, tens of per cent above 5 MPa), and Note
// says so. A gas that already names water is refused.
func (m *Mixture) Moist(t, p, humidity float64) (*Mixture, error) {
	if !(humidity >= 0 && humidity <= 1) {
		return nil, fmt.Errorf("gas: relative humidity is %g; it lies between 0 and 1", humidity)
	}
	sat, err := Saturation(t)
	if err != nil {
		return nil, err
	}
	y := humidity * sat / p
	if !(p > 0 && y < 1) {
		return nil, fmt.Errorf("gas: at %.2f K water alone would have %.4g Pa, not below the %.4g Pa of the gas", t, humidity*sat, p)
	}
	var wet []Fraction
	for _, f := range m.Composition() {
		if f.Name == "water" {
			return nil, fmt.Errorf("gas: the composition already has %.4g of water", f.X)
		}
		wet = append(wet, Fraction{f.Name, f.X * (1 - y)})
	}
	out, err := New(append(wet, Fraction{"water", y}))
	if err != nil {
		return nil, err
	}
	out.Note = note(m.Note, fmt.Sprintf("%.4g %% of water added for %.0f %% humidity at %.2f K and %.4g MPa, as in an ideal gas; "+
		"gas under pressure holds more", 100*y, 100*humidity, t, p/1e6))
	return out, nil
}

// mostRemainder is the largest unknown share that a named component may stand for.
const mostRemainder = 0.2

// WithRemainder makes a mixture of an analysis that does not sum to 1: the unknown rest is taken as the component
// named, and Note says so. Up to 0.2 may be unknown; a sum above 1 is refused. RemainderSpread tells what the guess costs.
func WithRemainder(composition []Fraction, remainder string) (*Mixture, error) {
	co, err := load()
	if err != nil {
		return nil, err
	}
	k := co.find(remainder)
	if k < 0 {
		return nil, fmt.Errorf("gas: remainder %q is no known component", remainder)
	}
	sum, at := 0.0, -1
	full := append([]Fraction(nil), composition...)
	for i, f := range full {
		sum += f.X
		if co.find(f.Name) == k {
			at = i
		}
	}
	rest := 1 - sum
	if !(rest >= -1e-12 && rest <= mostRemainder) {
		return nil, fmt.Errorf("gas: the fractions sum to %g; a remainder may stand for at most %g", sum, mostRemainder)
	}
	if rest <= 1e-12 {
		return New(composition)
	}
	if at >= 0 {
		full[at].X += rest
	} else {
		full = append(full, Fraction{co.comp[k].name, rest})
	}
	m, err := New(full)
	if err != nil {
		return nil, err
	}
	m.Note = note(m.Note, fmt.Sprintf("%.4g %% unknown, taken as %s", 100*rest, co.comp[k].name))
	return m, nil
}

// RemainderSpread bounds what the guess costs at a duty: the properties with the rest taken as each of the components
// named, in their order. Errors as WithRemainder and Duty: a heavy guess may not stay gas.
func RemainderSpread(composition []Fraction, as []string, ps, ts, pd float64) ([]Props, error) {
	var out []Props
	for _, name := range as {
		m, err := WithRemainder(composition, name)
		if err != nil {
			return nil, err
		}
		p, err := m.Duty(ps, ts, pd)
		if err != nil {
			return nil, fmt.Errorf("gas: remainder as %s: %w", name, err)
		}
		out = append(out, p)
	}
	return out, nil
}

// Dry gives the gas without its water; nil where it has none, or is nothing else.
func (m *Mixture) Dry() *Mixture {
	w := m.blend.co.find("water")
	x := m.blend.x
	if x[w] == 0 || x[w] == 1 {
		return nil
	}
	rest := 1 - x[w]
	x[w] = 0
	for i := range x {
		x[i] /= rest
	}
	return &Mixture{Note: note(m.Note, "without its water"), blend: newBlend(m.blend.co, x)}
}

func note(old, more string) string {
	if old == "" {
		return more
	}
	return old + "; " + more
}
