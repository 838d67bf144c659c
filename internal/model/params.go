package model

import (
	"fmt"
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// Gas is the gas as the model computes it: ideal, with constants adjusted to the real gas at the duty.
type Gas struct {
	R         float64 // J/(kg K): universal constant over molar mass, times Z at suction
	K         float64 // isentropic volume exponent: what p·V^K follows in a closed adiabatic cylinder
	KT        float64 // isentropic temperature exponent: what a thermometer at the discharge sees; 0: K
	Viscosity float64 // Pa s at 300 K
	Prandtl   float64

	pr06  float64 // Prandtl^0.6
	slope float64 // of the exponent over ln p, along the compression
}

// ValveData describes one valve as a single plate on springs.
type ValveData struct {
	FlowArea  float64 // m², effective at full lift
	ForceArea float64 // m², on which the pressure difference acts
	Lift      float64 // m
	Mass      float64 // kg, moving
	Stiffness float64 // N/m
	Preload   float64 // N
	Adhesion  float64 // extra pressure to break the plate off its seat, as a share of line pressure
	Stop      float64 // restitution at the stop
	Seat      float64 // restitution at the seat
	Damping   float64 // N s/m
	BaseLeak  float64 // m², of a healthy valve: no valve is perfectly tight
}

// Pulsation is one harmonic of a line pressure: p = p_mean·(1 + Σ Amp·cos(Order·θ − Phase)), θ from the phase mark.
type Pulsation struct {
	Order int
	Amp   float64 // share of the line pressure
	Phase float64 // degrees
}

// Params is all the physics that the skid file does not give. Typical fills it; tests change it.
type Params struct {
	Gas            Gas
	Duty           skid.Line            // the duty for which Gas holds; without it the script's first line
	Valves         map[string]ValveData // by valve id
	Ring, Packing  float64              // m², effective healthy leak areas; packing at the crank end of each throw
	SteadyGas      bool                 // the gas keeps its constants whatever the duty
	RealPath       bool                 // the exponent varies within the stroke, from the gas's at suction to that at discharge
	WallHeat       float64              // factor on the wall heat transfer correlation; 0: adiabatic
	WallAt         float64              // wall temperature between line temperatures: 0 suction, 1 discharge
	Passage        float64              // volume of each valve passage, in swept volumes of the throw
	Ripple         []skid.Ripple        // of the shaft speed within a turn, θ from the mark
	SuctionPulse   []Pulsation
	DischargePulse []Pulsation
	StartDeg       float64 // shaft angle at the first sample, degrees after the mark
	Scatter        float64 // factor on turn-to-turn scatter of breakaway and impacts; 0: none
	Noise          float64 // factor on all noise of gauges, accelerometers, converter and process values; 0: none
	GaugeError     float64 // factor on the fixed zero and gain errors of the pressure transmitters; 0: none
	CoverLag       float64 // s, first-order lag of a valve cover's temperature

	Mute map[string]bool // valves whose impacts no accelerometer feels, everything else being the same: what the others alone would sound like
}

// Stated bounds of a typical healthy machine, as shares. Values marked typical in the trade's handbooks are only
// starting points: a skid file that gives its own valve data replaces them.
const (
	typicalFlow     = 0.075  // effective area of a group at full lift, of the piston area (5 to 10 % is usual)
	typicalForce    = 1.25   // force area over flow area
	typicalAreal    = 10     // kg per m² of force area: thin plate with its share of the springs
	typicalSpring   = 0.30   // spring force at full lift over the greatest gas force at rated speed
	typicalPreload  = 0.27   // share of that at zero lift
	typicalAdhesion = 0.02   // extra share of line pressure to break off a dry clean seat
	typicalLeak     = 0.7e-4 // leak area over full-lift flow area of a healthy valve
	typicalSwing    = 11.2   // degrees of crank at rated speed the springs alone need to close the valve
)

// Typical derives plausible valves and losses from bore, stroke and rated speed, for the lines given (nil: the skid's
// fixed process values).
func Typical(sk *skid.Skid, lines []skid.Line) (Params, error) {
	if lines == nil {
		lines = sk.Process.Stages
	}
	p := Params{
		Valves:   map[string]ValveData{},
		WallHeat: 1, WallAt: 0.4, Passage: 1.5,
		StartDeg: 200, Scatter: 1, Noise: 1, GaugeError: 1, CoverLag: 45,
		Ripple: sk.Phase.Ripple,
		SuctionPulse: []Pulsation{
			{Order: 1, Amp: 0.003, Phase: 40}, {Order: 2, Amp: 0.007, Phase: 110}, {Order: 4, Amp: 0.002, Phase: 260}},
		DischargePulse: []Pulsation{
			{Order: 1, Amp: 0.003, Phase: 200}, {Order: 2, Amp: 0.006, Phase: 15}, {Order: 4, Amp: 0.002, Phase: 75}},
	}
	if len(p.Ripple) == 0 {
		p.Ripple = []skid.Ripple{{Order: 2, Amp: 0.003, Phase: 70}}
	}
	if len(lines) == 0 {
		return p, fmt.Errorf("model: no line pressures: neither the script nor the skid's process values give them")
	}
	g, err := gasOf(sk, lines[0])
	if err != nil {
		return p, err
	}
	p.Gas, p.Duty = g, skid.Line{Ps: lines[0].Ps, Pd: lines[0].Pd, Ts: lines[0].Ts}
	for i := range sk.Throws {
		t := &sk.Throws[i]
		if t.Stage < 1 || t.Stage > len(lines) {
			return p, fmt.Errorf("model: throw %s is on stage %d, and there are line pressures for %d", t.ID, t.Stage, len(lines))
		}
		if err := t.Cylinder.Validate(); err != nil {
			return p, fmt.Errorf("model: throw %s: %w", t.ID, err)
		}
		ln := lines[t.Stage-1]
		td := ln.Ts * math.Pow(ln.Pd/ln.Ps, (g.K-1)/g.K)
		for e := range t.Ends {
			end := &t.Ends[e]
			if !end.Works {
				continue
			}
			for _, v := range end.Suction {
				p.Valves[v.ID] = typicalValve(sk, t, e, v, len(end.Suction), ln.Ps/(g.R*ln.Ts))
			}
			for _, v := range end.Discharge {
				p.Valves[v.ID] = typicalValve(sk, t, e, v, len(end.Discharge), ln.Pd/(g.R*td))
			}
		}
		ap := t.Cylinder.Area(crank.HE)
		p.Ring = max(p.Ring, 6e-5*ap)
		p.Packing = max(p.Packing, 2e-6*ap)
	}
	return p, nil
}

// typicalValve fills what the skid file leaves open. rho is the gas density in the open valve.
func typicalValve(sk *skid.Skid, t *skid.Throw, end int, v skid.Valve, n int, rho float64) ValveData {
	rpm := sk.Machine.RatedRPM
	ap := t.Cylinder.Area(end)
	d := ValveData{FlowArea: v.FlowArea, Lift: v.Lift, Stiffness: v.StiffnessNPerM, Preload: v.PreloadN, Mass: v.MassKg,
		Adhesion: typicalAdhesion, Stop: 0.15, Seat: 0.2}
	if d.FlowArea == 0 {
		d.FlowArea = typicalFlow * ap / float64(n)
	}
	if d.Lift == 0 {
		d.Lift = min(max(1.8e-3*math.Sqrt(600/rpm), 0.8e-3), 3e-3)
	}
	d.ForceArea = typicalForce * d.FlowArea
	if d.Mass == 0 {
		d.Mass = typicalAreal * d.ForceArea
	}
	// The piston's greatest speed is about 1.6 times its mean.
	u := 1.6 * 2 * t.Cylinder.Stroke * rpm / 60 * ap / (d.FlowArea * float64(n))
	force := typicalSpring * 0.5 * rho * u * u * d.ForceArea
	swing := typicalSwing / (6 * rpm) // s
	force = max(force, 2*d.Lift*d.Mass/(swing*swing))
	if d.Preload == 0 {
		d.Preload = typicalPreload * force
	}
	if d.Stiffness == 0 {
		d.Stiffness = max(force-d.Preload, 0.2*force) / d.Lift
	}
	d.Damping = 0.12 * 2 * math.Sqrt(d.Stiffness*d.Mass)
	d.BaseLeak = typicalLeak * d.FlowArea
	return d
}
