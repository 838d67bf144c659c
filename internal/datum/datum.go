// Package datum finds where the dead centre of a throw really is, how large the clearance of each end really is, and
// what each pressure transducer shows too much, from what a healthy machine did at several duties.
//
// It needs: the mean pressures of some tens of steady turns at each duty, with the strokes in which both valves of an
// end are shut, the line conditions and the gas; best four pressure ratios at two speeds.
// It waits: for nothing; one call, one answer, in a fraction of a second.
// It emits: one joint estimate of dead-centre offset, clearances, pressure zeros, a correction of the exponent, wall heat
// and base leaks, with intervals meant to hold the truth in nine cases of ten or more.
// When it cannot (no closed stroke, a gas or line condition that is not known, columns alike): Reason says why.
//
// Over a closed stroke Y = ln p + k ln V moves only by leakage and wall heat (leaks.md section 1):
//
//	dY/dθ = k Σ A_j g_j + (k − 1) q̇/(pVω).
//
// A shifted dead centre, a wrong clearance, zero or exponent, heat and base leaks all bend Y, each in its own way over
// ratio and speed; straightness alone reads heat and leaks as 0.3 to 0.6 degrees (section 3). So all are estimated
// together, by Gauss and Newton on the integral of the equation, with priors that say what a healthy machine can
// have. Which law the wall heat follows is not known: it is estimated under three, and their disagreement is part of the
// interval, as is what each single duty contributes.
//
// Measured on 40 modelled machines drawn after all constants were fixed (valves, wall heat, transmitter and line errors,
// known ripple; half of them with a real gas whose exponent follows the duty), four ratios at two speeds: dead centre off
// by 0.020° rms, 0.057° at worst; clearance 0.04 and 0.12 points; zero 0.07 and 0.23 % of suction pressure; the intervals
// held in 98 to 100 %. The heat of that model is within
// reach of the laws used here: a machine need not be so kind. A 2 % leak at a discharge valve costs 0.16° rms, ripple of
// 0.6 % that nobody knows of 0.3°, which is not in the interval. Nor is an exponent told wrongly by another amount
// at each ratio: 0.01 between ratios 1.9 and 3 cost 0.1 to 0.2° and 1 % in zeros. Real gases whose exponent follows the
// duty, and is told so, cost nothing (0.028° rms, 0.035° at worst on eight machines). A zero that drifts by 0.5 % of
// suction pressure from the first duty to the last costs 0.09° rms (0.14° at worst); by 2 %, 0.22° (0.26°), which is not
// in the interval: let the transducers warm up first.
package datum

import (
	"math"

	"lapwing/internal/crank"
)

// Strokes index Duty.Closed.
const (
	Compression = 0
	Expansion   = 1
)

// Paths index Result.Area: suction and discharge group of the head end, of the crank end, and the rings.
const (
	HS = iota
	HD
	CS
	CD
	RG
	Paths
)

// Range is a run of grid points [From, To); From >= To means there is none.
type Range struct{ From, To int }

// Duty is what one cylinder did, on average over steady turns, at one duty.
type Duty struct {
	P      [2][]float64 // Pa absolute, per end on the grid; nil where there is no transducer
	Closed [2][2]Range  // [end][stroke]: where both valve groups of the end were shut in every turn
	Pocket [2]float64   // clearance that a pocket adds at this duty, share of the swept volume
	Omega  []float64    // rad/s, on the grid, or a single value

	Ps, Pd float64 // Pa absolute, line pressures
	Ts     float64 // K, suction line
	K      float64 // isentropic volume exponent of the gas at this duty
	KSlope float64 // by how much the exponent changes per unit of ln T along a stroke, about K at the middle of the strokes; 0: it does not
	RZ     float64 // J/(kg K), specific gas constant times mean compressibility
	Turns  int     // averaged
}

// Input is one cylinder. Grid point i lies at Lo + i·Step degrees after the head-end dead centre as the skid file has it.
type Input struct {
	Cylinder crank.Cylinder // as the skid file has it, without pocket
	Lo, Step float64
	Duties   []Duty
	// Beyond is the pressure on the other side of the rings where the other end has no transducer, Pa; 0 or NaN: not
	// known, the rings are then left out.
	Beyond float64
	// Noise is what is left in the mean pressures of noise and of bursts at the transducer, Pa, one standard deviation; the
	// low part of a stroke then counts for less. 0: next to none, as in the mean of some tens of turns of a compressor.
	Noise float64
	// NoValves says that no valve works on the strokes given, as in a motored engine: only the rings may leak.
	NoValves bool
}

// Priors are what a healthy machine can have: standard deviations, and centres where they are not zero. The zero value
// of a field means its default.
type Priors struct {
	DeadCentre float64 // degrees; default 2
	Clearance  float64 // of the swept volume; default 0.03
	Zero       float64 // share of the lowest Ps; default 0.01
	K          float64 // correction of the exponent; default 0.008 (leaks.md section 3)
	Heat       float64 // of ln of the factor on the heat law; default 0.6
	HeatShape  float64 // of the share by which heat transfer may differ from the law, once and twice a turn; default 0.4
	WallAt     float64 // wall temperature between suction (0) and adiabatic discharge (1); default 0.45
	WallSD     float64 // default 0.2
	// Leaks are in % of throughput of a gas like methane at 300 K: what a healthy seat leaves open does not shrink for a
	// lighter gas, so the percentages go with √(RT).
	Leak    float64 // of each valve group, about LeakAt; default 0.15 (leaks.md section 3)
	LeakAt  float64 // default 0.15
	Rings   float64 // about RingsAt; default 2: the strokes themselves tell rings well
	RingsAt float64 // default 1
}

func (p Priors) withDefaults() Priors {
	def := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	def(&p.DeadCentre, 2)
	def(&p.Clearance, .03)
	def(&p.Zero, .01)
	def(&p.K, .008)
	def(&p.Heat, .6)
	def(&p.HeatShape, .4)
	def(&p.WallAt, .45)
	def(&p.WallSD, .2)
	def(&p.Leak, .15)
	def(&p.LeakAt, .15)
	def(&p.Rings, 2)
	def(&p.RingsAt, 1)
	return p
}

// Value is an estimate with the half-width of its interval; NaN where it is not known.
type Value struct{ X, U float64 }

// Result is the joint estimate.
type Result struct {
	Reason string // why there is none; empty when there is one

	DeadCentreDeg Value    // degrees to be added to the grid's angles; the mark-to-dead-centre angle is that much smaller
	Clearance     [2]Value // of each end without pocket, share of its swept volume
	Zero          [2]Value // Pa that the transducer reads too high
	K             Value    // to be added to the gas's exponent
	HeatScale     Value    // factor on the heat law
	Area          [Paths]Value
	RMS           float64 // of ln p about the fit
	Duties        int     // used
	Strokes       int
	Points        int
	Remarks       []string // what makes the estimate weaker than it could be

	// DeadCentreByLaw is what each heat law by itself says, for those who want to see how much hangs on it.
	DeadCentreByLaw [laws]float64
}

// Valid reports whether there is an estimate.
func (r *Result) Valid() bool { return r.Reason == "" }

func absent(reason string) Result {
	v := Value{math.NaN(), math.NaN()}
	r := Result{Reason: reason, DeadCentreDeg: v, Clearance: [2]Value{v, v}, Zero: [2]Value{v, v}, K: v, HeatScale: v, RMS: math.NaN()}
	for j := range r.Area {
		r.Area[j] = v
	}
	for j := range r.DeadCentreByLaw {
		r.DeadCentreByLaw[j] = math.NaN()
	}
	return r
}
