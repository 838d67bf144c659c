package model

import (
	"fmt"

	"lapwing/internal/skid"
)

// gasOf takes the constants of the skid's gas at the duty of a line. Over a script's swing of pressures they stay as they
// are: the change of Z and of the exponents with duty is not in the model.
func gasOf(sk *skid.Skid, ln skid.Line) (Gas, error) {
	if !(ln.Ps > 0 && ln.Pd > ln.Ps && ln.Ts > 0) {
		return Gas{}, fmt.Errorf("model: line pressures %g and %g Pa at %g K give no duty", ln.Ps, ln.Pd, ln.Ts)
	}
	g := Gas{Viscosity: 1.1e-5, Prandtl: 0.72}
	switch {
	case sk.Gas.Mixture != nil:
		d, err := sk.Gas.Mixture.Duty(ln.Ps, ln.Ts, ln.Pd)
		if err != nil {
			return g, fmt.Errorf("model: gas: %w", err)
		}
		g.R, g.K, g.KT = d.R*d.Zs, d.KV, d.KT
	case sk.Gas.Fixed != nil:
		d, err := sk.Gas.Fixed.Duty(ln.Ps, ln.Ts, ln.Pd)
		if err != nil {
			return g, fmt.Errorf("model: gas: %w", err)
		}
		g.R, g.K, g.KT = d.R*d.Zs, d.KV, d.KT
	default:
		return g, fmt.Errorf("model: the skid names no gas")
	}
	return g, nil
}
