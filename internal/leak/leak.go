// Package leak sizes the leak paths of a cylinder from the pressures of its closed strokes.
//
// Needs: one turn's pressures and volumes of a cylinder, where its valves were closed, the line conditions, the gas.
// Waits: for nothing; one call, one turn. Take medians over 16 to 32 turns before believing a small leak.
// Emits: five signed areas with formal standard deviations, the phase shift, one pressure zero per end, the residual.
// When it cannot: Reason says why there is no fit at all, Why says it for one path; areas that are not known are NaN.
//
// The energy balance of a closed end, with inflow at its upstream temperature, is exactly
//
//	Y = ln p + k ln V,   dY/dθ = k Σ A_j g_j  (+ wall heat),
//
// with g_j the flow of a nozzle of unit area over pV and the shaft speed (the one of Saint-Venant and Wantzel, choked
// at the critical pressure ratio). The gas mass drops out. The fit is done in integral form: each g_j is cumulated
// over a stroke, every stroke's mean is removed from both sides, and all strokes are solved together by least
// squares with the phase shift and the pressure zeros as further unknowns: these carry nearly all noise and
// sensor error.
//
// What it cannot tell apart: wall heat reads as a leak, so subtract what the same machine showed when healthy (only the
// ring area is absolute); a packing leak reads as crank-end suction; a wrong k moves all four valves alike.
package leak

import (
	"math"

	"lapwing/internal/crank"
)

// Paths index the areas. HS is the head end's suction group, HD its discharge group, CS and CD those of the crank end,
// RG the piston rings between the ends. A leaking rod packing reads as CS.
const (
	HS = iota
	HD
	CS
	CD
	RG
	Paths
)

// Strokes index the closed strokes of an end.
const (
	Compression = iota
	Expansion
)

// Range is a run of grid points [From, To); From >= To means there is none.
type Range struct{ From, To int }

// Input is one turn of one cylinder. Grid point i lies at Lo + i·Step degrees after the head-end dead centre.
type Input struct {
	Cylinder crank.Cylinder
	Lo, Step float64
	P        [2][]float64 // Pa absolute, per end; nil where there is no transducer
	V        [2][]float64 // m³, per end, on the same grid: the volumes of Cylinder
	Closed   [2][2]Range  // [end][stroke]: where both valve groups of the end are closed
	Late     [2]bool      // the end's suction valves are held open into the compression stroke

	Ps, Pd float64   // Pa absolute, line pressures
	Ts, Td float64   // K, line temperatures
	K      float64   // isentropic volume exponent
	RZ     float64   // J/(kg K), specific gas constant times mean compressibility
	Omega  []float64 // rad/s, on the grid, or a single value
}

// Settings of the fit. The zero value of a field means its default.
type Settings struct {
	Low, High  float64 // window in shares of ln(Pd/Ps); defaults 0.05 and 0.95
	LowLate    float64 // lower end of the window in the compression of an end under late closing; default 0.10
	PastDeadDC float64 // degrees kept away from the dead centre that a stroke starts from; default 4
	ZeroSD     float64 // prior standard deviation of a pressure zero in one turn, share of Ps; default 0.03: what a prior holds back in every turn no median gives back, and 0.01 held back a seventh of a zero
	LeastPts   int     // least points in a stroke; default 12
	Mass       bool    // work out Fit.Mass too
}

func (s Settings) withDefaults() Settings {
	def := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	def(&s.Low, .05)
	def(&s.High, .95)
	def(&s.LowLate, .10)
	def(&s.PastDeadDC, 4)
	def(&s.ZeroSD, .03)
	if s.LeastPts == 0 {
		s.LeastPts = 12
	}
	return s
}

// Fit is the outcome. Standard deviations are formal ones: they take every point's error as independent and the
// gas, the geometry and the line pressures as known, and are far too narrow as an interval for people.
type Fit struct {
	Reason string // why there is no fit; empty when there is one

	Area, SD [Paths]float64 // m², effective (with the discharge coefficient in it); outflow and inflow alike count positive
	Why      [Paths]string  // why an area is NaN
	Mass     [Paths]float64 // kg per turn through the area over the whole turn (rings: both directions added); NaN as Area, and without Settings.Mass

	Phase, PhaseSD float64    // degrees to be added to the grid's angles
	Zero, ZeroSD   [2]float64 // Pa that the transducer reads too high; NaN where the end gave no stroke
	RMS            float64    // of the residual of ln p
	Points         int
	Used           [2][2]bool // [end][stroke]

	// SuctionOrRings says that the rings could not be told from suction valves: a suction area then means "suction
	// valve or rings" (both ends alike suggest the rings).
	SuctionOrRings bool

	sigma float64 // of ln p, for the formal deviations
}

// Valid reports whether there is a fit.
func (f *Fit) Valid() bool { return f.Reason == "" }

func absent(reason string) Fit {
	nan := math.NaN()
	f := Fit{Reason: reason, Phase: nan, PhaseSD: nan, RMS: nan,
		Zero: [2]float64{nan, nan}, ZeroSD: [2]float64{nan, nan}}
	for j := range Paths {
		f.Area[j], f.SD[j], f.Mass[j] = nan, nan, nan
		f.Why[j] = reason
	}
	return f
}
