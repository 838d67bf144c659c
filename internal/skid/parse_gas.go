package skid

import (
	"errors"
	"math"
	"strings"

	"lapwing/internal/gas"
)

// gas reads what is compressed: a composition, a named gas, or fixed numbers.
func (r *reader) gas(o *object, g *Gas) {
	s := o.sub("gas", true, "name", "named", "mole_percent", "fixed")
	if s == nil {
		return
	}
	ways := 0
	for _, k := range []string{"named", "mole_percent", "fixed"} {
		if s.has(k) {
			ways++
		}
	}
	if ways != 1 {
		r.problem(s.at, s.path, "write exactly one of named, mole_percent, fixed", "the gas is given in %d ways", ways)
		return
	}
	g.Name, _ = s.text("name", nil, "a name for people", false)
	switch {
	case s.has("named"):
		r.named(s, g)
	case s.has("fixed"):
		r.fixed(s, g)
	default:
		r.composition(s, g)
	}
}

func (r *reader) named(s *object, g *Gas) {
	name, ok := s.text("named", nil, "the name of a known gas: "+list(gas.Names()), true)
	if !ok {
		return
	}
	m, err := gas.Named(name)
	if err != nil {
		fix := "known: " + list(gas.Names())
		if near := nearest(name, gas.Names()); near != "" {
			fix = "did you mean " + near + "?"
		}
		s.wrong("named", fix, "no gas is known by the name %q", clip(name))
		return
	}
	g.Mixture = m
	if g.Name == "" {
		g.Name = name
	}
}

// composition reads mole per cent by component. The sum must be 100 within half a per cent; it is then normalised.
func (r *reader) composition(s *object, g *Gas) {
	const fix = "list the components: methane: 96.5"
	keys, values := s.entries("mole_percent", true, fix)
	var all []gas.Fraction
	sum, good := 0.0, len(keys) > 0
	for i, k := range keys {
		path := join2(join2(s.path, "mole_percent"), clip(k.Value))
		if len(k.Value) > 40 || i >= 40 {
			r.problem(place(k), path, fix, "not a component of a gas")
			return
		}
		if _, err := gas.New([]gas.Fraction{{Name: k.Value, X: 1}}); err != nil {
			r.problem(place(k), path, "a component that is not known cannot be computed; add a trace to the one most like it", "%s", strings.TrimPrefix(err.Error(), "gas: "))
			good = false
			continue
		}
		v, ok := r.number(values[i], path, unit{name: "mole per cent"})
		if !ok {
			good = false
			continue
		}
		if v < 0 || v > 100 {
			r.problem(place(values[i]), path, "write mole per cent", "%s %% is outside 0 to 100", short(v))
			good = false
			continue
		}
		sum += v
		all = append(all, gas.Fraction{Name: k.Value, X: v / 100})
	}
	switch {
	case !good:
		if len(keys) == 0 && s.has("mole_percent") {
			s.wrong("mole_percent", fix, "no component")
		}
		return
	case math.Abs(sum-1) < 0.01:
		s.wrong("mole_percent", "multiply by 100: the unit is mole per cent", "the components add up to %s, which looks like fractions", short(sum))
		return
	case math.Abs(sum-100) > 0.5:
		s.wrong("mole_percent", "check the analysis; up to half a per cent off is evened out", "the components add up to %s, not to 100", short(sum))
		return
	}
	m, err := gas.New(all)
	if err != nil {
		s.wrong("mole_percent", fix, "%s", strings.TrimPrefix(err.Error(), "gas: "))
		return
	}
	g.Mixture = m
	if g.Name == "" {
		g.Name = "a mixture"
	}
}

// fixed reads a gas given by its own numbers, the same at every duty.
func (r *reader) fixed(s *object, g *Gas) {
	o := s.sub("fixed", true, "molar_mass_kg_per_kmol", "z_suction", "z_discharge", "volume_exponent", "temperature_exponent")
	if o == nil {
		return
	}
	f := gas.Fixed{
		M:  o.num("molar_mass_kg_per_kmol", bounds{1, 400}, true) / 1e3,
		Zs: o.numOr("z_suction", bounds{0.1, 3}, 1),
		Zd: o.numOr("z_discharge", bounds{0.1, 3}, 1),
		KV: o.num("volume_exponent", bounds{1.01, 3}, true),
	}
	f.KT = o.numOr("temperature_exponent", bounds{1.01, 3}, f.KV)
	g.Fixed = &f
	if g.Name == "" {
		g.Name = "a gas given by its numbers"
	}
}

// errNoGas is what Duty gives for a Skid that was not parsed.
var errNoGas = errors.New("skid: no gas is given")

// Duty gives the gas's properties from suction (Pa absolute, K) to discharge (Pa absolute), errors as gas.Mixture.At.
func (g Gas) Duty(ps, ts, pd float64) (gas.Props, error) {
	switch {
	case g.Mixture != nil:
		return g.Mixture.Duty(ps, ts, pd)
	case g.Fixed != nil:
		return g.Fixed.Duty(ps, ts, pd)
	}
	return gas.Props{}, errNoGas
}
