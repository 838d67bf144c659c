package skid

import (
	"errors"
	"math"
	"strings"

	"go.yaml.in/yaml/v3"

	"lapwing/internal/gas"
)

// gas reads what is compressed: a composition, a named gas, or fixed numbers.
func (r *reader) gas(o *object, g *Gas, atm float64) {
	s := o.sub("gas", true, "name", "named", "mole_percent", "remainder", "moisture", "fixed")
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
	for _, k := range []string{"remainder", "moisture"} {
		if s.has(k) && (s.has("fixed") || k == "remainder" && !s.has("mole_percent")) {
			s.wrong(k, "delete it, or list the gas under mole_percent", "%s belongs to an analysis", k)
			return
		}
	}
	switch {
	case s.has("named"):
		r.named(s, g)
	case s.has("fixed"):
		r.fixed(s, g)
	default:
		r.composition(s, g)
	}
	r.moisture(s, g, atm)
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

// moisture adds water to a gas that was analysed dry: relative humidity at a temperature and pressure, or a dew point at
// a pressure.
func (r *reader) moisture(s *object, g *Gas, atm float64) {
	w := s.sub("moisture", false, "relative_humidity_percent", "dew_point_c", "at_temperature_c", "at_pressure_bar_abs", "at_pressure_bar_gauge")
	if w == nil {
		return
	}
	const fix = "write relative_humidity_percent with at_temperature_c, or dew_point_c; and the pressure for which it was stated"
	humid, dew := w.has("relative_humidity_percent"), w.has("dew_point_c")
	if humid == dew {
		r.problem(w.at, w.path, fix, "the moisture is given in %d ways", map[bool]int{false: 0, true: 2}[humid])
		return
	}
	if dew && w.has("at_temperature_c") {
		w.wrong("at_temperature_c", "delete it", "a dew point is a temperature by itself")
		return
	}
	share := 1.0
	var t float64
	if dew {
		t = w.num("dew_point_c", bounds{-100, 200}, true)
	} else {
		share = w.num("relative_humidity_percent", bounds{0.1, 100}, true) / 100
		t = w.num("at_temperature_c", bounds{-100, 200}, true)
	}
	p := w.pressure("at_pressure", bounds{0.05, 700}, true, atm)
	if g.Mixture == nil || math.IsNaN(share+t+p) {
		return
	}
	wet, err := g.Mixture.Moist(t+273.15, p, share)
	if err != nil {
		r.problem(w.at, w.path, "check temperature and pressure, and that the analysis is that of dry gas", "%s", strings.TrimPrefix(err.Error(), "gas: "))
		return
	}
	g.Mixture, g.WaterAt = wet, p
	for _, c := range wet.Composition() {
		if c.Name == "water" {
			g.Water = c.X
		}
	}
}

// composition reads mole per cent by component. The sum must be 100 within half a per cent, and is then normalised, or a
// remainder says what the rest is taken as.
func (r *reader) composition(s *object, g *Gas) {
	const fix = "list the components: methane: 96.5"
	keys, values := s.entries("mole_percent", true, fix)
	if len(keys) > 30 {
		s.wrong("mole_percent", fix, "%d components; 21 are known", len(keys))
		return
	}
	var all []gas.Fraction
	before := len(r.problems)
	r.components(s, keys)
	sum, good := 0.0, len(keys) > 0 && len(r.problems) == before
	for i, k := range keys {
		path := join2(join2(s.path, "mole_percent"), clip(k.Value))
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
	case s.has("remainder"):
		r.remainder(s, g, all)
		return
	case math.Abs(sum-1) < 0.01:
		s.wrong("mole_percent", "multiply by 100: the unit is mole per cent", "the components add up to %s, which looks like fractions", short(sum))
		return
	case math.Abs(sum-100) > 0.5:
		s.wrong("mole_percent", "check the analysis; up to half a per cent off is evened out, and for a rest that was not analysed write remainder: with the component it is taken as", "the components add up to %s, not to 100", short(sum))
		return
	}
	m, err := gas.New(all)
	if err != nil {
		s.wrong("mole_percent", fix, "%s", strings.TrimPrefix(err.Error(), "gas: "))
		return
	}
	g.Mixture, g.Listed = m, all
	if g.Name == "" {
		g.Name = "a mixture"
	}
}

// remainder takes what the analysis does not name as one component.
func (r *reader) remainder(s *object, g *Gas, all []gas.Fraction) {
	as, ok := s.text("remainder", nil, "the component that the rest is taken as: ethane", true)
	if !ok {
		return
	}
	m, err := gas.WithRemainder(all, as)
	if err != nil {
		s.wrong("remainder", "name a component of a gas; it may stand for at most 20 %", "%s", strings.TrimPrefix(err.Error(), "gas: "))
		return
	}
	g.Mixture, g.Listed, g.Remainder = m, all, as
	g.Unknown = 1
	for _, c := range all {
		g.Unknown -= c.X
	}
	g.Unknown = max(0, g.Unknown)
	if g.Name == "" {
		g.Name = "a mixture"
	}
}

// components notes every component that is not known. All at once is the quick way; only when that fails each is tried.
func (r *reader) components(s *object, keys []*yaml.Node) {
	var all []gas.Fraction
	for _, k := range keys {
		all = append(all, gas.Fraction{Name: k.Value, X: 1 / float64(len(keys))})
	}
	if _, err := gas.New(all); err == nil {
		return
	}
	for _, k := range keys {
		if len(k.Value) > 40 {
			r.problem(place(k), s.path+".mole_percent", "write the name or formula of a component", "%q is no component of a gas", clip(k.Value))
			continue
		}
		if _, err := gas.New([]gas.Fraction{{Name: k.Value, X: 1}}); err != nil {
			r.problem(place(k), join2(join2(s.path, "mole_percent"), clip(k.Value)),
				"a component that is not known cannot be computed; add a trace to the one most like it", "%s", strings.TrimPrefix(err.Error(), "gas: "))
		}
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
