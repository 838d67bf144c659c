package gas

import (
	"fmt"
	"strings"
)

type named struct {
	name        string
	composition []Fraction
}

// gases are the gases that can be called by name. The compositions of the mixtures are examples made for this
// project; a machine's own analysis is always better.
func gases() []named {
	one := func(name string) []Fraction { return []Fraction{{name, 1}} }
	return []named{
		// Dry air with the argon of the atmosphere and its traces counted as nitrogen.
		{"air", []Fraction{{"nitrogen", .7812}, {"oxygen", .2096}, {"argon", .0092}}},
		{"nitrogen", one("nitrogen")},
		{"hydrogen", one("hydrogen")},
		{"hydrogen-makeup", []Fraction{{"hydrogen", .90}, {"methane", .06}, {"ethane", .02}, {"propane", .01},
			{"n_butane", .004}, {"isobutane", .003}, {"n_pentane", .002}, {"nitrogen", .001}}},
		{"pipeline-gas", []Fraction{{"methane", .93}, {"ethane", .035}, {"propane", .008}, {"n_butane", .002},
			{"isobutane", .0015}, {"n_pentane", .0005}, {"nitrogen", .013}, {"carbon_dioxide", .01}}},
		{"biomethane", []Fraction{{"methane", .968}, {"carbon_dioxide", .018}, {"nitrogen", .01}, {"oxygen", .004}}},
		{"biogas", []Fraction{{"methane", .60}, {"carbon_dioxide", .385}, {"nitrogen", .01}, {"oxygen", .005}}},
		{"synthesis-gas", []Fraction{{"hydrogen", .66}, {"carbon_monoxide", .28}, {"carbon_dioxide", .03}, {"methane", .02},
			{"nitrogen", .01}}},
		{"methane", one("methane")},
		{"carbon-dioxide", one("carbon_dioxide")},
		{"oxygen", one("oxygen")},
		{"helium", one("helium")},
		{"argon", one("argon")},
	}
}

// Names lists the gases that Named knows.
func Names() []string {
	var out []string
	for _, g := range gases() {
		out = append(out, g.name)
	}
	return out
}

// Named gives a gas by its name; Composition tells what was assumed.
func Named(name string) (*Mixture, error) {
	for _, g := range gases() {
		if g.name == name {
			return New(g.composition)
		}
	}
	return nil, fmt.Errorf("gas: there is no gas named %q; known are %s", name, strings.Join(Names(), ", "))
}
