package gas

import (
	"fmt"
	"math"
)

// Polytropic is a path between two real states that is neither loss-free nor without heat.
type Polytropic struct {
	From, To   State
	N          float64 // volume exponent of the path, ln(p2/p1)/ln(ρ2/ρ1)
	Flow       float64 // J/kg, ∫v dp along the path
	Efficiency float64 // Flow over the rise of enthalpy; for a path without heat the polytropic efficiency
}

// pathSteps are the steps in ln p of PolytropicEfficiency; with 32 the fourth-order rule is right to 1e-8 in T.
const pathSteps = 32

// PolytropicEfficiency follows the gas from T1 (K), p1 (Pa absolute) to p2 when every small step has the same
// efficiency: dh = v dp/efficiency, and so dT/d ln p = p/(ρ cp efficiency) + p·JT, integrated along the real gas.
// For an expansion give the reciprocal of what the turbine trade calls its efficiency. Definition as in ASME PTC 10
// (from memory). Errors as At; an efficiency that is not positive is refused.
func (m *Mixture) PolytropicEfficiency(t1, p1, p2, efficiency float64) (Polytropic, error) {
	if !(efficiency > 0) || math.IsInf(efficiency, 0) {
		return Polytropic{}, fmt.Errorf("gas: polytropic efficiency is %g; it must be positive", efficiency)
	}
	from, err := m.At(t1, p1)
	if err != nil {
		return Polytropic{}, fmt.Errorf("gas: start of the path: %w", err)
	}
	rise := func(t, lnP float64) (float64, error) {
		p := math.Exp(lnP)
		s, density, err := m.root(t, p)
		if err != nil {
			return 0, fmt.Errorf("gas: along the path: %w", err)
		}
		st := s.state(density)
		return p/(st.Rho*st.Cp*efficiency) + p*st.JT, nil
	}
	if !(p2 > 0 && p2 <= highestP) {
		return Polytropic{}, fmt.Errorf("gas: end of the path at %.4g MPa is %w", p2/1e6, ErrRange)
	}
	t, ln1 := t1, math.Log(p1)
	h := (math.Log(p2) - ln1) / pathSteps
	for i := range pathSteps {
		at := ln1 + float64(i)*h
		var k [4]float64
		for j, c := range [4]float64{0, .5, .5, 1} {
			prev := 0.0
			if j > 0 {
				prev = k[j-1]
			}
			// The last point is p2 itself: rounding must not push it out of the range.
			if k[j], err = rise(t+c*h*prev, min(at+c*h, math.Log(highestP))); err != nil {
				return Polytropic{}, err
			}
		}
		t += h * (k[0] + 2*k[1] + 2*k[2] + k[3]) / 6
	}
	to, err := m.At(t, p2)
	if err != nil {
		return Polytropic{}, fmt.Errorf("gas: end of the path: %w", err)
	}
	out := Polytropic{From: from, To: to, N: from.KappaV, Flow: efficiency * (to.H - from.H), Efficiency: efficiency}
	if lnP := math.Log(p2 / p1); math.Abs(lnP) > 1e-6 {
		out.N = lnP / math.Log(to.Rho/from.Rho)
	}
	return out, nil
}

// PolytropicExponent follows p·vⁿ = constant from T1 (K), p1 (Pa absolute) to p2, for n > 0: ρ2 = ρ1 (p2/p1)^(1/n), and
// the temperature is the one that has this density at p2. The difference between the rise of enthalpy and Flow is heat
// taken in (n below the isentropic exponent: given off) or friction. Errors as At. Efficiency is NaN where the enthalpy
// does not change.
func (m *Mixture) PolytropicExponent(t1, p1, p2, n float64) (Polytropic, error) {
	if !(n > 0) || math.IsInf(n, 0) {
		return Polytropic{}, fmt.Errorf("gas: polytropic exponent is %g; it must be positive", n)
	}
	from, err := m.At(t1, p1)
	if err != nil {
		return Polytropic{}, fmt.Errorf("gas: start of the path: %w", err)
	}
	want := from.Rho * math.Pow(p2/p1, 1/n)
	t := t1 * math.Pow(p2/p1, (n-1)/n)
	for range 80 {
		s, density, err := m.root(t, p2)
		if err != nil {
			return Polytropic{}, fmt.Errorf("gas: end of the path: %w", err)
		}
		st := s.state(density)
		// −∂ln ρ/∂ln T at constant p is 1 + JT ρ cp.
		step := math.Log(st.Rho/want) / (1 + st.JT*st.Rho*st.Cp)
		t *= math.Exp(min(max(step, -.1), .1))
		if math.Abs(step) < 1e-14 {
			break
		}
	}
	to, err := m.At(t, p2)
	if err != nil {
		return Polytropic{}, fmt.Errorf("gas: end of the path: %w", err)
	}
	if math.Abs(to.Rho/want-1) > 1e-9 {
		return Polytropic{}, fmt.Errorf("gas: no temperature found at %.4g MPa with a density of %.4g kg/m³", p2/1e6, want)
	}
	flow := p1 / from.Rho * math.Log(p2/p1)
	if math.Abs(n-1) > 1e-9 {
		flow = n / (n - 1) * (p2/to.Rho - p1/from.Rho)
	}
	out := Polytropic{From: from, To: to, N: n, Flow: flow, Efficiency: math.NaN()}
	if rise := to.H - from.H; rise != 0 {
		out.Efficiency = flow / rise
	}
	return out, nil
}
