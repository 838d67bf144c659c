package gas

import (
	"fmt"
	"math"
)

// Path is a compression (or expansion) at constant entropy between two real states.
type Path struct {
	From, To State
	KV       float64 // average volume exponent, ln(p2/p1)/ln(ρ2/ρ1)
	KT       float64 // average temperature exponent, from (k−1)/k = ln(T2/T1)/ln(p2/p1)
}

// T2 is the temperature at the end, K.
func (p Path) T2() float64 { return p.To.T }

// Work is the enthalpy rise, J/kg: the work of a loss-free machine.
func (p Path) Work() float64 { return p.To.H - p.From.H }

// Isentropic follows the gas from T1 (K), p1 (Pa absolute) to p2 at constant entropy. Errors as At.
func (m *Mixture) Isentropic(t1, p1, p2 float64) (Path, error) {
	return m.isentropic(t1, p1, p2, (*Mixture).At)
}

// isentropic takes the states at both ends by at.
func (m *Mixture) isentropic(t1, p1, p2 float64, at func(m *Mixture, t, p float64) (State, error)) (Path, error) {
	from, err := at(m, t1, p1)
	if err != nil {
		return Path{}, fmt.Errorf("gas: start of the compression: %w", err)
	}
	t := t1 * math.Pow(p2/p1, (from.KappaT-1)/from.KappaT)
	for range 60 {
		s, density, err := m.root(t, p2)
		if err != nil {
			return Path{}, fmt.Errorf("gas: end of the compression: %w", err)
		}
		st := s.state(density)
		step := min(max((from.S-st.S)/st.Cp, -.1), .1) // ∂s/∂ln T at constant p is cp
		t *= math.Exp(step)
		if math.Abs(step) < 1e-14 {
			break
		}
	}
	to, err := at(m, t, p2)
	if err != nil {
		return Path{}, fmt.Errorf("gas: end of the compression: %w", err)
	}
	if math.Abs(to.S-from.S) > 1e-8*to.Cp {
		return Path{}, fmt.Errorf("gas: no temperature found at %.4g MPa with the entropy of %.2f K, %.4g MPa", p2/1e6, t1, p1/1e6)
	}
	path := Path{From: from, To: to, KV: from.KappaV, KT: from.KappaT}
	if lnP := math.Log(p2 / p1); math.Abs(lnP) > 1e-6 {
		path.KV = lnP / math.Log(to.Rho/from.Rho)
		path.KT = 1 / (1 - math.Log(to.T/from.T)/lnP)
	}
	return path, nil
}
