package gas

import (
	"errors"
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestNewRefuses(t *testing.T) {
	for _, v := range []struct {
		name string
		comp []Fraction
		want string
	}{
		{"unknown", []Fraction{{"xenon", 1}}, `component "xenon" is unknown; known are methane, nitrogen`},
		{"negative", []Fraction{{"CH4", 1.1}, {"N2", -.1}}, "fraction of N2 is -0.1"},
		{"NaN", []Fraction{{"CH4", math.NaN()}}, "fraction of CH4 is NaN"},
		{"twice", []Fraction{{"CH4", .5}, {"methane", .5}}, "methane is named twice"},
		{"short", []Fraction{{"CH4", .9}}, "sum to 0.9"},
		{"per cent", []Fraction{{"CH4", 90}, {"N2", 10}}, "not per cent"},
		{"nothing", nil, "sum to 0"},
	} {
		if _, err := New(v.comp); err == nil || !strings.Contains(err.Error(), v.want) {
			t.Errorf("%s: %v, want %q", v.name, err, v.want)
		}
	}
}

func TestNewNormalises(t *testing.T) {
	m, err := New([]Fraction{{"CH4", .9}, {"c2", .06}, {"Carbon-Dioxide", .037}})
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(m.Note, "0.997") {
		t.Errorf("the change must be told: %q", m.Note)
	}
	sum := 0.0
	for _, f := range m.Composition() {
		sum += f.X
	}
	near(t, "sum", sum, 1, 1e-15)
	exact, err := New([]Fraction{{"methane", .9}, {"N2", .1}})
	if err != nil || exact.Note != "" {
		t.Errorf("nothing to tell, but %q, %v", exact.Note, err)
	}
}

func TestNames(t *testing.T) {
	co, err := load()
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]int{}
	for i := range co.comp {
		if got := co.find(co.comp[i].name); got != i {
			t.Errorf("%s is found as %d, want %d", co.comp[i].name, got, i)
		}
		for _, f := range strings.Fields(formulae[i]) {
			if j, twice := seen[f]; twice {
				t.Errorf("%s means both %d and %d", f, i, j)
			}
			seen[f] = i
		}
	}
	// Molar masses check that the formulae stand beside the right component (IUPAC standard atomic weights).
	for _, v := range []struct {
		formula string
		m       float64
	}{{"CH4", 16.043}, {"N2", 28.014}, {"CO2", 44.009}, {"C2H6", 30.070}, {"C3H8", 44.097}, {"i-C4H10", 58.124}, {"nC5", 72.151},
		{"C6H14", 86.178}, {"C10", 142.286}, {"H2", 2.016}, {"O2", 31.998}, {"CO", 28.010}, {"H2O", 18.015}, {"H2S", 34.08}, {"He", 4.0026}, {"Ar", 39.95}} {
		m, err := New([]Fraction{{v.formula, 1}})
		if err != nil {
			t.Error(err)
			continue
		}
		near(t, v.formula, m.M()*1e3, v.m, 2e-4)
	}
	for _, name := range Names() {
		m, err := Named(name)
		if err != nil || m.Note != "" {
			t.Errorf("%s: %v %q", name, err, m.Note)
			continue
		}
		if _, err := m.Duty(5e6, 308.15, 9e6); err != nil && name != "carbon-dioxide" {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := Named("steam"); err == nil || !strings.Contains(err.Error(), "pipeline-gas") {
		t.Errorf("an unknown name must list the known ones: %v", err)
	}
}

// Values computed with the public-domain NIST reference code (shared reference folder, isentropic_compression.csv and
// worked/ex6), inline so that the check bites anywhere.
func TestDutyInline(t *testing.T) {
	for _, v := range []struct {
		gas                            string
		t1, p1, p2, t2, z1, z2, kt, kv float64
	}{
		{"methane", 290, 2000, 4000, 342.233178, .962173319, .9626742, 1.3139339, 1.3152315},
		{"methane", 310, 1000, 3000, 396.353242, .985192906, .986612989, 1.2881225, 1.2903016},
		{"hydrogen-makeup", 310, 2000, 5000, 395.040414, 1.00921391, 1.02283893, 1.3597341, 1.3873426},
		{"nitrogen", 310, 1000, 3500, 444.037164, .999173673, 1.01318081, 1.4021996, 1.4243945},
		{"carbon-dioxide", 310, 2000, 5000, 382.622747, .907144056, .8909659, 1.2982051, 1.2659295},
		{"air", 293.15, 101.325, 400, 433.349208, .999646556, 1.00110775, 1.3979137, 1.3999955},
	} {
		m, err := Named(v.gas)
		if err != nil {
			t.Fatal(err)
		}
		p, err := m.Duty(v.p1*1e3, v.t1, v.p2*1e3)
		if err != nil {
			t.Error(err)
			continue
		}
		near(t, v.gas+" T2s", p.T2s, v.t2, 3e-9)
		near(t, v.gas+" Zs", p.Zs, v.z1, 5e-9)
		near(t, v.gas+" Zd", p.Zd, v.z2, 5e-9)
		near(t, v.gas+" KT", p.KT, v.kt, 1e-7)
		near(t, v.gas+" KV", p.KV, v.kv, 1e-7)
	}
}

func TestRefusals(t *testing.T) {
	co2, err := Named("carbon-dioxide")
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range []struct {
		t, p float64
		want error
	}{
		{300, 0, ErrRange}, {300, math.NaN(), ErrRange}, {900, 1e6, ErrRange}, {300, 1e8, ErrRange},
		{280, 1e7, ErrNoGas},       // liquid carbon dioxide
		{280, 4.25e6, ErrTwoPhase}, // just above its vapour pressure, 4.161 MPa (Span and Wagner 1996, from memory)
		{280, 4.10e6, nil},         // just below
	} {
		if _, err := co2.At(v.t, v.p); !errors.Is(err, v.want) {
			t.Errorf("%g K, %g Pa: %v, want %v", v.t, v.p, err, v.want)
		}
	}
	if _, err := co2.Isentropic(280, 1e7, 2e7); !errors.Is(err, ErrNoGas) {
		t.Errorf("the error of the start must come through: %v", err)
	}
	wet, err := New([]Fraction{{"CH4", .99}, {"H2O", .01}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := wet.At(300, 2e6); !errors.Is(err, ErrTwoPhase) { // water's vapour pressure at 300 K is 3.5 kPa, here 20 kPa are asked
		t.Errorf("water must condense: %v", err)
	}
	if _, err := wet.At(350, 2e6); err != nil { // 41.7 kPa at 350 K
		t.Errorf("water stays vapour: %v", err)
	}
}

func TestFixed(t *testing.T) {
	f := Fixed{M: .01604246, Zs: .98, Zd: .97, KV: 1.29, KT: 1.30}
	p, err := f.Duty(2e6, 303.15, 5e6)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "T2s", p.T2s, 374.532821, 1e-8) // worked/ex9: Ts 303.15 K, r 2.5, k 1.3
	near(t, "R", p.R, 518.28, 1e-4)
	if p.Zs != .98 || p.Zd != .97 || p.KV != 1.29 || p.KT != 1.30 {
		t.Errorf("numbers changed on the way: %+v", p)
	}
	f.KV = 1
	if _, err := f.Duty(2e6, 303.15, 5e6); err == nil || !strings.Contains(err.Error(), "volume exponent") {
		t.Errorf("KV = 1: %v", err)
	}
	if _, err := (Fixed{M: .02, Zs: 1, Zd: 1, KV: 1.3, KT: 1.3}).Duty(0, 300, 1); err == nil {
		t.Error("no suction pressure must be refused")
	}
}

func TestEqualPressures(t *testing.T) {
	m, err := Named("pipeline-gas")
	if err != nil {
		t.Fatal(err)
	}
	a, err := m.Isentropic(300, 2e6, 2e6)
	if err != nil {
		t.Fatal(err)
	}
	b, err := m.Isentropic(300, 2e6, 2.002e6)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "KV at ratio one", a.KV, b.KV, 1e-4)
	near(t, "KT at ratio one", a.KT, b.KT, 1e-4)
}

// The thermodynamic relations must hold between values that are computed by different derivatives.
func TestConsistency(t *testing.T) {
	m, err := New(nist21)
	if err != nil {
		t.Fatal(err)
	}
	rapid.Check(t, func(rt *rapid.T) {
		T := rapid.Float64Range(330, 450).Draw(rt, "T")
		p := rapid.Float64Range(1e5, 2e7).Draw(rt, "p")
		get := func(T, p float64) State {
			iso, d, err := m.root(T, p)
			if err != nil {
				rt.Fatal(err)
			}
			return iso.state(d)
		}
		s := get(T, p)
		const h = 1e-4
		a, b := get(T*(1-h), p), get(T*(1+h), p)
		c, e := get(T, p*(1-h)), get(T, p*(1+h))
		check := func(what string, got, want float64) {
			if !(math.Abs(got-want) <= 2e-6*math.Abs(want)) {
				rt.Fatalf("%s at %g K, %g Pa: %g, by differences %g", what, T, p, got, want)
			}
		}
		check("cp = ∂h/∂T", s.Cp, (b.H-a.H)/(b.T-a.T))
		check("cp = T ∂s/∂T", s.Cp, T*(b.S-a.S)/(b.T-a.T))
		check("∂s/∂p = ∂ρ/∂T/ρ²", (e.S-c.S)/(e.P-c.P), (b.Rho-a.Rho)/(b.T-a.T)/(s.Rho*s.Rho))
		check("w² = κ p/ρ", s.W*s.W, s.KappaV*s.P/s.Rho)
		if math.Abs(s.JT) > 1e-7 {
			check("JT = −∂h/∂p/cp", s.JT, -(e.H-c.H)/(e.P-c.P)/s.Cp)
		}
	})
}

func TestFugacity(t *testing.T) {
	m, err := New(nist21)
	if err != nil {
		t.Fatal(err)
	}
	iso, d, err := m.root(350, 8e6)
	if err != nil {
		t.Fatal(err)
	}
	lnPhi := iso.lnFugacity(d)
	res := iso.residual(d, nil)
	z := 1 + res.d
	sum := 0.0
	for i, x := range iso.x {
		sum += x * lnPhi[i]
	}
	near(t, "Σ x ln φ = α + Z − 1 − ln Z", sum, res.a+z-1-math.Log(z), 1e-12)

	// ln φ_i + ln Z = ∂(nα^r)/∂n_i at constant volume and temperature, by differences.
	total := func(i int, dn float64) float64 {
		x := iso.x
		x[i] += dn
		n := 1 + dn
		for j := range x {
			x[j] /= n
		}
		return n * newBlend(iso.co, x).at(350).residual(d*n, nil).a
	}
	for i, x := range iso.x {
		h := x * 1e-3
		num := (total(i, h) - total(i, -h)) / (2 * h)
		within(t, iso.co.comp[i].name, lnPhi[i]+math.Log(z), num, 1e-6)
	}
}
