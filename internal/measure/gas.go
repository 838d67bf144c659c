package measure

import (
	"math"

	"lapwing/internal/gas"
)

// Gas is what the measures need of the gas at one throw's duty; NaN or 0 where it is not known. R J/(kg K); Zs and Zd
// compressibility at suction and discharge; KV and KT volume and temperature isentropic exponents, never interchanged.
type Gas struct {
	R, Zs, Zd, KV, KT float64

	Zn   float64 // compressibility at 0 °C and 101.325 kPa
	Work float64 // isentropic enthalpy rise of the real gas over that of p v^KV = constant between the same states; unknown: 1
}

// NewGas asks a gas about a duty: suction pressure (Pa absolute) and temperature (K), discharge pressure. A gas given by
// fixed numbers counts as ideal at normal conditions. Zn stays unknown for a gas that would condense there. Errors as
// gas.Gas.Duty.
func NewGas(g gas.Gas, ps, ts, pd float64) (Gas, error) {
	p, err := g.Duty(ps, ts, pd)
	if err != nil {
		return Gas{}, err
	}
	out := Gas{R: p.R, Zs: p.Zs, Zd: p.Zd, KV: p.KV, KT: p.KT, Zn: 1, Work: 1}
	m, ok := g.(*gas.Mixture)
	if !ok {
		return out, nil
	}
	out.Zn = math.NaN()
	if s, err := m.At(normalT, normalP); err == nil {
		out.Zn = s.Z
	}
	if path, err := m.Isentropic(ts, ps, pd); err == nil && math.Abs(math.Log(pd/ps)) > 1e-3 {
		out.Work = path.Work() / out.rise(ps, ts, pd)
	}
	return out, nil
}

// normal is the density at normal conditions, kg/m³; NaN unknown.
func (g *Gas) normal() float64 {
	if !known(g.R, g.Zn) {
		return math.NaN()
	}
	return normalP / (g.Zn * g.R * normalT)
}

// rise is the enthalpy rise of a compression at constant entropy, J/kg: ∫v dp along p v^KV = constant, times what the
// real gas differs by from that (Work). NaN unknown.
func (g *Gas) rise(ps, ts, pd float64) float64 {
	if !known(g.R, g.Zs, ps, ts, pd) || !(g.KV > 1) {
		return math.NaN()
	}
	work := g.Work
	if !known(work) {
		work = 1
	}
	x := (g.KV - 1) / g.KV
	return work * g.Zs * g.R * ts / x * (math.Pow(pd/ps, x) - 1)
}
