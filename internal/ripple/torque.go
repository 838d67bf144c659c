package ripple

import (
	"fmt"
	"math"
	"math/cmplx"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
)

// Orders is how many harmonics are computed: 1 to Orders. Higher ones of a compressor's torque turn the shaft by less
// than a hundredth of a degree.
const Orders = 4

// Harmonics are the speed ripple's harmonics 1 to Orders as complex numbers aₙ·exp(i·pₙ), aₙ as a fraction of the mean
// speed and pₙ as in turn.Ripple.
type Harmonics [Orders]complex128

// Ripple appends the harmonics as turn takes them.
func (h Harmonics) Ripple(to []turn.Ripple) []turn.Ripple {
	for i, z := range h {
		to = append(to, turn.Ripple{Order: i + 1, Amp: cmplx.Abs(z), PhaseDeg: cmplx.Phase(z) * 180 / math.Pi})
	}
	return to
}

// Apart gives the largest angle, in degrees, by which the maps of two ripples can differ with one mark a turn: the
// error Σ (Δaₙ/n)(sin(nθ−pₙ) + sin pₙ) is at most 2 Σ |Δaₙ|/n.
func (h Harmonics) Apart(g Harmonics) float64 {
	sum := 0.0
	for i := range h {
		sum += cmplx.Abs(h[i]-g[i]) / float64(i+1)
	}
	return 2 * sum * 180 / math.Pi
}

// Machine is what turns the shaft unevenly.
type Machine struct {
	Inertia    float64 // kg m², all that rotates, driver included
	Atmosphere float64 // Pa
	Throws     []Throw
}

// Throw is one cylinder on the shaft.
type Throw struct {
	Cylinder       crank.Cylinder
	DeadCentreDeg  float64 // degrees of rotation from the phase mark to its head-end dead centre
	Works          [2]bool // head end, crank end
	BlindAtSuction bool    // the end that does not work stands at suction pressure, not at the atmosphere
}

// Torque computes the ripple of one turn. It keeps tables for the grid of the turns and is not for several goroutines.
type Torque struct {
	m      Machine
	grid   turn.Grid
	throws []tables
	mass   [Orders]complex128 // Σ throws of −m x″x′, per ω²: torque harmonics of the reciprocating masses
	total  float64            // kg m², inertia with the mean share of the reciprocating masses
}

// tables hold, for one throw and the grid points 0° to 360°−step, (2/N)·x′(θ)·exp(−inθ) with θ from the mark: the sum
// of force times table is the harmonic Cₙ − iSₙ of the torque.
type tables struct {
	from, n int
	arm     [Orders][]complex128
	he, ce  float64 // m², piston areas
}

// NewTorque checks the machine.
func NewTorque(m Machine) (*Torque, error) {
	if !(m.Inertia > 0) || math.IsInf(m.Inertia, 0) || !(m.Atmosphere > 0) || len(m.Throws) == 0 {
		return nil, fmt.Errorf("ripple: inertia %g kg m², atmosphere %g Pa, %d throws", m.Inertia, m.Atmosphere, len(m.Throws))
	}
	for i, t := range m.Throws {
		if err := t.Cylinder.Validate(); err != nil {
			return nil, fmt.Errorf("ripple: throw %d: %w", i+1, err)
		}
	}
	return &Torque{m: m}, nil
}

func (q *Torque) prepare(g turn.Grid) {
	q.grid, q.throws, q.mass, q.total = g, nil, [Orders]complex128{}, q.m.Inertia
	for _, t := range q.m.Throws {
		c := t.Cylinder
		tab := tables{from: int(math.Round(g.Index(0))), n: int(math.Round(360 / g.Step)), he: c.Area(crank.HE), ce: c.Area(crank.CE)}
		for o := range tab.arm {
			tab.arm[o] = make([]complex128, tab.n)
		}
		m := c.MassPiston + c.MassCrosshead
		for i := range tab.n {
			deg := float64(i) * g.Step
			x1, x2 := c.Velocity(deg, 1), c.Accel(deg, 1, 0)
			for o := range tab.arm {
				turned := cmplx.Rect(2/float64(tab.n), -float64(o+1)*(deg+t.DeadCentreDeg)*math.Pi/180)
				tab.arm[o][i] = complex(x1, 0) * turned
				q.mass[o] -= complex(m*x2*x1, 0) * turned
			}
			q.total += m * x1 * x1 / float64(tab.n)
		}
		q.throws = append(q.throws, tab)
	}
}

// Why a turn's torque cannot be computed.
const (
	whyTurn     = "the turn is not valid"
	whyThrows   = "the turn has other throws than the machine"
	whyPressure = "a working end has no sound pressure in this turn"
	whySuction  = "the suction pressure behind a blind end is not known"
)

// Of gives the ripple that one turn's pressures cause on a shaft of the stated inertia, or why it cannot. ps is, per
// throw, the suction pressure in Pa behind an end that is blind at suction; it is not looked at elsewhere.
//
// J_eff·ω·dω/dθ is the torque less its mean. The force along the rod, F = (p_HE−p_atm)A_HE − (p_CE−p_atm)A_CE − m x″ω²
// (piston and crosshead with all that goes with them), turns the crank by F·dx/dθ: virtual work. With harmonics
// Cₙ cos nθ + Sₙ sin nθ of the sum over all throws, aₙ = |Tₙ|/(n J ω²), pₙ = atan2(Cₙ, −Sₙ) (windows.md section 1). To
// first order in aₙ; J takes in the mean of m x′².
func (q *Torque) Of(t *turn.Turn, ps []float64) (h Harmonics, why string) {
	switch {
	case !t.Valid():
		return h, whyTurn
	case len(t.Throws) != len(q.m.Throws) || len(ps) != len(t.Throws):
		return h, whyThrows
	}
	if t.Throws[0].Grid != q.grid {
		q.prepare(t.Throws[0].Grid)
	}
	omega := t.Throws[0].RPM * math.Pi / 30
	torque := q.mass
	for o := range torque {
		torque[o] *= complex(omega*omega, 0)
	}
	for k := range q.throws {
		tab := &q.throws[k]
		var p [2][]float64
		held := [2]float64{q.m.Atmosphere, q.m.Atmosphere}
		for e := range p {
			switch {
			case !q.m.Throws[k].Works[e]:
				if q.m.Throws[k].BlindAtSuction {
					if held[e] = ps[k]; math.IsNaN(ps[k]) {
						return h, whySuction
					}
				}
			case t.Throws[k].P[e] == nil || t.Throws[k].Bad[e] != "":
				return h, whyPressure
			default:
				p[e] = t.Throws[k].P[e][tab.from : tab.from+tab.n]
			}
		}
		tab.add(&torque, p, held, q.m.Atmosphere)
	}
	for o := range h { // aₙ exp(ipₙ) = (−Sₙ + iCₙ)/(nJω²) = i(Cₙ + iSₙ)/(nJω²)
		h[o] = 1i * cmplx.Conj(torque[o]) / complex(float64(o+1)*q.total*omega*omega, 0)
		if cmplx.IsNaN(h[o]) || cmplx.IsInf(h[o]) {
			return Harmonics{}, whyPressure
		}
	}
	return h, ""
}

// add adds one throw's gas torque.
func (tab *tables) add(torque *[Orders]complex128, p [2][]float64, held [2]float64, atm float64) {
	var re, im [Orders]float64
	for i := range tab.n {
		he, ce := held[0], held[1]
		if p[0] != nil {
			he = p[0][i]
		}
		if p[1] != nil {
			ce = p[1][i]
		}
		f := (he-atm)*tab.he - (ce-atm)*tab.ce
		for o := range re {
			a := tab.arm[o][i]
			re[o] += f * real(a)
			im[o] += f * imag(a)
		}
	}
	for o := range re {
		torque[o] += complex(re[o], im[o])
	}
}
