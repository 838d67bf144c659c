// Package gas gives the properties of real gases: GERG-2008 (ISO 20765-2) for any mixture of its 21 components, and
// a gas given by its own numbers.
//
// Needs: a composition in mole fractions, or fixed numbers; temperature in K, pressure in Pa absolute.
// Waits: for nothing, but it is slow (milliseconds): ask once per duty, never per turn.
// Emits: states (State), isentropic paths (Path), and the handful of numbers a duty needs (Props).
// When it cannot: an error that wraps ErrRange, ErrNoGas or ErrTwoPhase; never a number that only looks right.
//
// There are two isentropic exponents and they are never interchanged: the volume exponent for pressure and volume,
// the temperature exponent for discharge temperature.
package gas

import (
	"fmt"
	"math"
	"strings"
)

// Fraction is one component's share of a gas. Name is as in GERG-2008 ("methane", "carbon_dioxide", "n_butane"; blanks
// and hyphens do as well) or the usual formula ("CH4", "CO2", "nC4"). X is a mole fraction.
type Fraction struct {
	Name string
	X    float64
}

// Mixture is a gas of fixed composition.
type Mixture struct {
	Note  string // what was changed on the way in, e.g. that the fractions were normalised; empty when nothing was
	blend *blend
}

// tolerance is how far the sum of the fractions may be from one.
const tolerance = 0.005

// New makes a mixture. Fractions that sum to 1 within 0.5 % are normalised, and Note says so; anything further off,
// negative, unknown or named twice is refused.
func New(composition []Fraction) (*Mixture, error) {
	co, err := load()
	if err != nil {
		return nil, err
	}
	var x [nComponents]float64
	sum := 0.0
	for _, f := range composition {
		i := co.find(f.Name)
		switch {
		case i < 0:
			return nil, fmt.Errorf("gas: component %q is unknown; known are %s", f.Name, strings.Join(co.names(), ", "))
		case !(f.X >= 0) || math.IsInf(f.X, 0):
			return nil, fmt.Errorf("gas: fraction of %s is %g; a mole fraction lies between 0 and 1", f.Name, f.X)
		case x[i] != 0:
			return nil, fmt.Errorf("gas: %s is named twice", co.comp[i].name)
		}
		x[i] = f.X
		sum += f.X
	}
	if math.Abs(sum-100) <= 100*tolerance {
		return nil, fmt.Errorf("gas: the fractions sum to %g: write fractions of 1, not per cent", sum)
	}
	if !(math.Abs(sum-1) <= tolerance) {
		return nil, fmt.Errorf("gas: the fractions sum to %g; they must sum to 1 within %g", sum, tolerance)
	}
	m := &Mixture{}
	if math.Abs(sum-1) > 1e-12 { // not the rounding of a sum
		m.Note = fmt.Sprintf("fractions sum to %.6f; normalised to 1", sum)
	}
	for i := range x {
		x[i] /= sum
	}
	m.blend = newBlend(co, x)
	return m, nil
}

// M is the molar mass, kg/mol.
func (m *Mixture) M() float64 { return m.blend.m }

// R is the specific gas constant, J/(kg K).
func (m *Mixture) R() float64 { return gasConstant / m.blend.m }

// Composition gives the normalised mole fractions that are not zero, in the order of GERG-2008.
func (m *Mixture) Composition() []Fraction {
	var out []Fraction
	for i, x := range m.blend.x {
		if x > 0 {
			out = append(out, Fraction{m.blend.co.comp[i].name, x})
		}
	}
	return out
}

func (c *coefficients) names() []string {
	var out []string
	for i := range c.comp {
		out = append(out, c.comp[i].name)
	}
	return out
}

// find gives the index of a component by name or formula, −1 when unknown.
func (c *coefficients) find(name string) int {
	n := strings.NewReplacer("-", "", "_", "", " ", "").Replace(strings.ToLower(name))
	for i := range c.comp {
		if n == strings.ReplaceAll(c.comp[i].name, "_", "") {
			return i
		}
		for _, f := range strings.Fields(formulae[i]) {
			if n == f {
				return i
			}
		}
	}
	return -1
}

// formulae are the other names of the components, in the order of GERG-2008, lower case, no hyphens.
var formulae = [nComponents]string{
	"ch4 c1", "n2", "co2", "c2h6 c2", "c3h8 c3",
	"ic4h10 ic4", "nc4h10 nc4 c4h10 butane", "ic5h12 ic5", "nc5h12 nc5 c5h12 pentane", "nc6h14 nc6 c6h14 c6 hexane",
	"nc7h16 nc7 c7h16 c7 heptane", "nc8h18 nc8 c8h18 c8 octane", "nc9h20 nc9 c9h20 c9 nonane",
	"nc10h22 nc10 c10h22 c10 decane", "h2",
	"o2", "co", "h2o", "h2s hydrogensulphide", "he", "ar",
}
