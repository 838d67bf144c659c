package gas

import (
	"bytes"
	"embed"
	"encoding/csv"
	"fmt"
	"strconv"
)

// The coefficients of GERG-2008: O. Kunz, W. Wagner, J. Chem. Eng. Data 57 (2012) 3032; ISO 20765-2. The digits were
// read out of the public-domain reference code of NIST (usnistgov/AGA8).
//
//go:embed gerg2008_components.csv gerg2008_pure_terms.csv gerg2008_binary.csv gerg2008_departure_terms.csv
var files embed.FS

const (
	gasConstant  = 8.314472 // J/(mol K), of the residual part
	idealScale   = 8.31451 / gasConstant
	nComponents  = 21
	referenceT   = 298.15   // K, where enthalpy and entropy of every pure ideal gas are zero
	referenceP   = 101325.0 // Pa
	molPerLitre  = 1000.0   // mol/m³
	gramPerMol   = 1e-3     // kg/mol
	noDeparture  = -1
	departureTop = 10 // departure functions are numbered 1..10; 8 and 9 do not exist
)

// component is one of the 21 substances.
type component struct {
	name   string
	m      float64 // kg/mol
	tc     float64 // K
	rhoc   float64 // mol/m³
	n03    float64
	hyper  [4]float64 // n04…n07
	theta  [4]float64 // K; 0 and 2 belong to sinh, 1 and 3 to cosh
	a1, a2 float64    // integration constants of the ideal part: zeros of entropy and enthalpy
	pure   []term
}

// term is n δᵈ τᵗ times exp(−δᶜ) (c > 0), or times exp(−η(δ−ε)² − β(δ−γ)) (gauss), or alone.
type term struct {
	n, t                  float64
	d, c                  int
	gauss                 bool
	eta, eps, beta, gamma float64
}

// pair is the binary data of components i < j.
type pair struct {
	betaV, gammaV, betaT, gammaT float64
	f                            float64
	departure                    []term
}

type coefficients struct {
	comp [nComponents]component
	pair [nComponents][nComponents]pair // [i][j], i < j
}

// load parses the embedded tables. They are part of the program: an error here is a broken build.
func load() (*coefficients, error) {
	c := &coefficients{}
	if err := each("gerg2008_components.csv", func(r row) {
		i := r.int("index") - 1
		k := &c.comp[i]
		k.name = r.str("name")
		k.m = r.num("molar_mass_g_mol") * gramPerMol
		k.tc, k.rhoc = r.num("Tc_K"), r.num("rhoc_mol_l")*molPerLitre
		k.n03 = r.num("n03")
		for j := range 4 {
			k.hyper[j] = r.num(fmt.Sprintf("n%02d", j+4))
			k.theta[j] = r.num(fmt.Sprintf("theta%02d_K", j+4))
		}
		k.setReference(r.num("n01"), r.num("n02"))
	}); err != nil {
		return nil, err
	}
	if err := each("gerg2008_pure_terms.csv", func(r row) {
		k := &c.comp[r.int("index")-1]
		k.pure = append(k.pure, term{n: r.num("n"), d: r.int("d"), t: r.num("t"), c: r.int("c")})
	}); err != nil {
		return nil, err
	}
	var departure [departureTop + 1][]term
	if err := each("gerg2008_departure_terms.csv", func(r row) {
		n := r.int("departure")
		departure[n] = append(departure[n], term{
			n: r.num("n"), d: r.int("d"), t: r.num("t"), gauss: r.str("kind") == "gaussian",
			eta: r.num("eta"), eps: r.num("epsilon"), beta: r.num("beta"), gamma: r.num("gamma"),
		})
	}); err != nil {
		return nil, err
	}
	if err := each("gerg2008_binary.csv", func(r row) {
		p := pair{betaV: r.num("beta_v"), gammaV: r.num("gamma_v"), betaT: r.num("beta_T"), gammaT: r.num("gamma_T"), f: r.num("F")}
		if n := r.int("departure"); n != noDeparture {
			p.departure = departure[n]
		}
		c.pair[r.int("i")-1][r.int("j")-1] = p
	}); err != nil {
		return nil, err
	}
	return c, nil
}

// row is one line of a table; the first bad cell is kept in err.
type row struct {
	head  map[string]int
	cells []string
	err   *error
}

func (r row) str(name string) string {
	i, ok := r.head[name]
	if !ok && *r.err == nil {
		*r.err = fmt.Errorf("column %s is missing", name)
	}
	return r.cells[i]
}

func (r row) num(name string) float64 {
	v, err := strconv.ParseFloat(r.str(name), 64)
	if err != nil && *r.err == nil {
		*r.err = err
	}
	return v
}

func (r row) int(name string) int { return int(r.num(name)) }

func each(file string, f func(row)) error {
	data, err := files.ReadFile(file)
	if err != nil {
		return fmt.Errorf("gas: %w", err)
	}
	lines, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
	if err != nil {
		return fmt.Errorf("gas: %s: %w", file, err)
	}
	head := map[string]int{}
	for i, name := range lines[0] {
		head[name] = i
	}
	for _, cells := range lines[1:] {
		var bad error
		f(row{head, cells, &bad})
		if bad != nil {
			return fmt.Errorf("gas: %s: %w", file, bad)
		}
	}
	return nil
}
