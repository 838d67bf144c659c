package gas

import (
	"errors"
	"fmt"
	"math"
)

// Props is what the line needs to know of the gas at one duty.
type Props struct {
	M   float64 // kg/mol
	R   float64 // J/(kg K), specific gas constant
	Zs  float64 // compressibility factor at suction
	Zd  float64 // ... and at discharge, at the isentropic temperature
	KV  float64 // isentropic volume exponent, average over the compression
	KT  float64 // isentropic temperature exponent, average over the compression
	KVs float64 // volume exponent at suction ...
	KVd float64 // ... and at discharge: dense gas begins a stroke with another one than it ends with
	T2s float64 // K, discharge temperature of an isentropic compression
	Wet bool    // some of the water would condense; the numbers are those of gas that keeps it as vapour
}

// Gas is anything that can tell its properties at a duty: suction pressure (Pa absolute) and temperature (K),
// discharge pressure.
type Gas interface {
	Duty(ps, ts, pd float64) (Props, error)
}

// Duty computes the properties of a mixture; errors as At. A gas that is saturated with water at suction, as behind a
// scrubber, is computed all the same, with Wet set: only where without its water it would stay gas.
func (m *Mixture) Duty(ps, ts, pd float64) (Props, error) {
	path, err := m.Isentropic(ts, ps, pd)
	wet := false
	if errors.Is(err, ErrTwoPhase) {
		if dry := m.Dry(); dry != nil {
			if _, stays := dry.Isentropic(ts, ps, pd); stays == nil {
				path, err = m.isentropic(ts, ps, pd, (*Mixture).vapour)
				wet = err == nil
			}
		}
	}
	if err != nil {
		return Props{}, err
	}
	return Props{Wet: wet, M: m.M(), R: m.R(), Zs: path.From.Z, Zd: path.To.Z, KV: path.KV, KT: path.KT,
		KVs: path.From.KappaV, KVd: path.To.KappaV, T2s: path.To.T}, nil
}

// Fixed is a gas given by its own numbers, the same at every duty.
type Fixed struct {
	M      float64 // kg/mol
	Zs, Zd float64 // compressibility factors at suction and discharge
	KV, KT float64 // isentropic volume and temperature exponents
}

// Validate says what is wrong with the numbers.
func (f Fixed) Validate() error {
	for _, v := range []struct {
		name         string
		value, least float64
	}{
		{"molar mass", f.M, 0}, {"compressibility at suction", f.Zs, 0}, {"compressibility at discharge", f.Zd, 0},
		{"volume exponent", f.KV, 1}, {"temperature exponent", f.KT, 1},
	} {
		if !(v.value > v.least) || math.IsInf(v.value, 0) {
			return fmt.Errorf("gas: %s is %g; it must be greater than %g", v.name, v.value, v.least)
		}
	}
	return nil
}

// Duty gives the fixed numbers, with T2s = Ts (pd/ps)^((KT−1)/KT).
func (f Fixed) Duty(ps, ts, pd float64) (Props, error) {
	if err := f.Validate(); err != nil {
		return Props{}, err
	}
	if !(ps > 0 && ts > 0 && pd > 0) {
		return Props{}, fmt.Errorf("gas: suction %g Pa and %g K, discharge %g Pa: all must be positive", ps, ts, pd)
	}
	return Props{M: f.M, R: gasConstant / f.M, Zs: f.Zs, Zd: f.Zd, KV: f.KV, KT: f.KT, KVs: f.KV, KVd: f.KV,
		T2s: ts * math.Pow(pd/ps, (f.KT-1)/f.KT)}, nil
}
