package verdict

import "math"

// The pressure features of an end that the patterns speak about, in their order.
const (
	nCompEarly = iota
	nCompLate
	nExpEarly
	nExpLate
	dischargeLate
	suctionLate
	veSuction
	veDischarge
	massComp
	massExp
	patternLen
)

var patternNames = [patternLen]string{"n_comp_early", "n_comp_late", "n_exp_early", "n_exp_late", "discharge_opens_late_deg",
	"suction_opens_late_deg", "ve_suction_percent", "ve_discharge_percent", "mass_comp_percent", "mass_exp_percent"}

// pattern is the change of an end's features, in the units that people read, per unit of a hypothesis's amplitude.
type pattern [patternLen]float64

// at3 is a figure at pressure ratios 1.5, 2.5 and 4.
type at3 [3]float64

var tableRatios = at3{1.5, 2.5, 4}

// at interpolates linearly in ln(ratio), held at the ends.
func (v at3) at(ratio float64) float64 {
	x := math.Log(ratio)
	for i := range 2 {
		a, b := math.Log(tableRatios[i]), math.Log(tableRatios[i+1])
		if x <= b || i == 1 {
			u := math.Max(0, math.Min(1, (x-a)/(b-a)))
			return v[i] + u*(v[i+1]-v[i])
		}
	}
	return v[1]
}

// Leak patterns per 1 % of the end's delivered mass lost: reference/methods.md table 1.3 (modelled cylinder). The
// apparent mass changes are not in that table: they follow from the exponents, see masses.
var leakTable = map[path][8]at3{
	suctionPath: {
		{-.0079, -.0047, -.0028}, {-.0075, -.0043, -.0028}, {.0265, .0120, .0062}, {.0110, .0057, .0031},
		{.20, .16, .13}, {-.27, -.28, -.26}, {.12, .19, .22}, {-.16, -.15, -.10}},
	dischargePath: {
		{.0136, .0083, .0055}, {.0053, .0035, .0023}, {-.0155, -.0083, -.0045}, {-.0157, -.0086, -.0052},
		{-.32, -.26, -.21}, {.19, .22, .24}, {-.08, -.15, -.20}, {.25, .24, .16}},
	ringsPath: {
		{-.0074, -.0032, -.0007}, {-.0090, -.0059, -.0044}, {.0308, .0165, .0100}, {.0104, .0058, .0031},
		{.04, -.02, -.08}, {-.29, -.34, -.35}, {.13, .23, .30}, {-.03, .01, .06}},
}

// Sensor and process patterns.
var (
	// Pressure plotted 1° early: reference/methods.md table 3.3, signs as stated under it; the openings move by −1°
	// while their expectation stays.
	earlyTable = [8]at3{{.037, .028, .025}, {.026, .020, .018}, {.088, .042, .024}, {.034, .003, -.008},
		{-1, -1, -1}, {-1, -1, -1}, {.43, .69, .84}, {.79, .89, .79}}
	// Pressure zero +1 % of suction pressure: reference/methods.md table 3.4 has the exponents for +2.5 % at ratio 2.5.
	// The openings there are line crossings; here they are crossings of the end's own plateau against an expectation
	// from the end's own plateaus: the apparent ratio falls by (1 − 1/r) % of suction pressure, which moves the
	// expectation earlier by about 54° (discharge) and 36° (suction) per unit of ln r (table 4.3), the crossing hardly.
	zeroTable = [8]at3{{-.0096, -.0096, -.0096}, {-.0068, -.0068, -.0068}, {-.0068, -.0068, -.0068}, {-.0096, -.0096, -.0096},
		{.18, .32, .40}, {.12, .22, .27}, {0, 0, 0}, {0, 0, 0}}
	// True clearance 1 point lower than assumed: table 3.4 at ratio 2.5 (assumed too high).
	clearanceTable = [8]at3{{.014, .014, .014}, {.018, .018, .018}, {.069, .069, .069}, {.051, .051, .051}}
	// Another gas: all exponents move together; unit 0.01 of the volume exponent.
	gasTable = [8]at3{{.01, .01, .01}, {.01, .01, .01}, {.01, .01, .01}, {.01, .01, .01}}
)

type path int

// Which way the gas goes.
const (
	suctionPath path = iota
	dischargePath
	ringsPath
)

func patternOf(t [8]at3, ratio float64) (p pattern) {
	for i := range t {
		p[i] = t[i].at(ratio)
	}
	masses(&p, ratio)
	return p
}

// masses fills in the apparent mass changes. Over a stroke on p·Vⁿ = const between the plateaus, Δln(p·Vᵏ) = ±ln r·(1 − k/n),
// so a shift δ of the mean exponent is an apparent Δm/m of ±ln r·δ/(n·k), here with n = k = 1.3, in per cent.
func masses(p *pattern, ratio float64) {
	f := 100 * math.Log(ratio) / (1.3 * 1.3)
	p[massComp] = f * (p[nCompEarly] + p[nCompLate]) / 2
	p[massExp] = -f * (p[nExpEarly] + p[nExpLate]) / 2
}
