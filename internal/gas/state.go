package gas

import (
	"errors"
	"fmt"
	"math"
)

// What At and what is built on it can refuse; test with errors.Is.
var (
	ErrRange    = errors.New("outside the range of GERG-2008 (60 to 700 K, up to 70 MPa)")
	ErrNoGas    = errors.New("no gas at this state: it is liquid or inside the two-phase region")
	ErrTwoPhase = errors.New("part of the gas would condense at this state")
)

// Range of GERG-2008 (ISO 20765-2): the normal range is 90 to 450 K and up to 35 MPa; this is the extended one.
const (
	lowestT, highestT = 60.0, 700.0
	highestP          = 70e6
)

// State is the gas at one temperature and pressure. Enthalpy and entropy are zero for each pure ideal gas at
// 298.15 K and 101.325 kPa, and entropy includes mixing: use differences.
type State struct {
	T, P   float64 // K, Pa absolute
	M      float64 // kg/mol
	Rho    float64 // kg/m³
	Z      float64 // compressibility factor
	Cv, Cp float64 // J/(kg K)
	W      float64 // m/s, speed of sound
	H, S   float64 // J/kg, J/(kg K)
	JT     float64 // K/Pa, Joule-Thomson coefficient
	KappaV float64 // isentropic volume exponent −(v/p)(∂p/∂v)_s: for p-V, crossing angles, volumetric efficiency
	KappaT float64 // isentropic temperature exponent 1/(1 − (p/T)(∂T/∂p)_s): for discharge temperature
}

// At gives the gas at T (K) and p (Pa absolute). The errors wrap ErrRange, ErrNoGas or ErrTwoPhase.
func (m *Mixture) At(t, p float64) (State, error) {
	s, density, err := m.root(t, p)
	if err != nil {
		return State{}, err
	}
	if s.condenses(p, density) {
		return State{}, fmt.Errorf("gas: at %.2f K and %.4g MPa: %w", t, p/1e6, ErrTwoPhase)
	}
	return s.state(density), nil
}

// vapour gives the gas at T and p whether or not part of it would condense.
func (m *Mixture) vapour(t, p float64) (State, error) {
	s, density, err := m.root(t, p)
	if err != nil {
		return State{}, err
	}
	return s.state(density), nil
}

// root finds the gas density without asking whether the gas is stable against condensing.
func (m *Mixture) root(t, p float64) (*isotherm, float64, error) {
	if !(t >= lowestT && t <= highestT && p > 0 && p <= highestP) {
		return nil, 0, fmt.Errorf("gas: %.2f K, %.4g MPa is %w", t, p/1e6, ErrRange)
	}
	s := m.blend.at(t)
	density, ok := s.gasRoot(p)
	if !ok {
		return nil, 0, fmt.Errorf("gas: at %.2f K and %.4g MPa: %w", t, p/1e6, ErrNoGas)
	}
	return s, density, nil
}

// state computes everything from temperature and molar density (mol/m³).
func (s *isotherm) state(density float64) State {
	const r = gasConstant
	t := s.t
	res := s.residual(density, nil)

	var cv0, u0, a0 float64 // ideal part, in R, RT and RT
	for i, x := range s.x {
		if x == 0 {
			continue
		}
		k := &s.co.comp[i]
		cv0 += x * k.cv(t)
		u0 += x * (k.energy(t) + k.a2/t)
		a0 += x * (math.Log(density*x) + k.a1 + k.a2/t + k.free(t))
	}

	p := density * r * t * (1 + res.d)
	dpdD := r * t * (1 + 2*res.d + res.dd)
	dpdT := density * r * (1 + res.d - res.dt)
	cv := r * (cv0 - res.tt)
	cp := cv + t*dpdT*dpdT/(density*density*dpdD)
	u := r * t * (u0 + res.t)
	mT := p * dpdT / (density * density * dpdD * cp)
	return State{
		T: t, P: p, M: s.m,
		Rho: density * s.m,
		Z:   1 + res.d,
		Cv:  cv / s.m, Cp: cp / s.m,
		W:      math.Sqrt(cp / cv * dpdD / s.m),
		H:      (u + p/density) / s.m,
		S:      r * (u0 + res.t - a0 - res.a) / s.m,
		JT:     (t*dpdT/(density*dpdD) - 1) / (density * cp),
		KappaV: density * dpdD * cp / (cv * p),
		KappaT: 1 / (1 - mT),
	}
}
