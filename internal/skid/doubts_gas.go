package skid

import (
	"fmt"
	"math"
	"strings"

	"lapwing/internal/gas"
)

// rests are what an unknown remainder may as well be: light and heavy, inert and not.
var rests = []string{"nitrogen", "carbon_dioxide", "ethane", "propane", "n_butane"}

// Beyond these an unknown remainder or the moisture is worth a doubt.
const (
	leastRest  = 0.002 // mole fraction
	muchSpread = 0.003 // of the volume exponent: 0.003 moves an opening by some tenths of a degree
	idealWater = 10e5  // Pa, above which gas holds noticeably more water than the ideal-gas rule says
)

// gas doubts what was done to the analysis on its way in.
func (d *doubter) gas() {
	g := d.sk.Gas
	if g.Mixture == nil {
		return
	}
	if g.Remainder == "" && strings.Contains(g.Mixture.Note, "normalised") {
		d.add("gas.mole_percent", "The analysis was evened out to 100 %. A larger slip would have been refused.", "%s", g.Mixture.Note)
	}
	if g.Unknown > leastRest {
		if lo, hi, ok := g.bounds(d.duties); !ok || hi.KV-lo.KV > muchSpread {
			d.add("gas.remainder", "What was not analysed still moves exponents and temperatures, and a baseline hides a wrong guess only while the gas stays the same. A full analysis tells.",
				"%.3g %% of the gas is unknown and taken as %s%s", 100*g.Unknown, g.Remainder, spread(lo, hi, ok))
		}
	}
	if g.Water > 0 && g.WaterAt > idealWater {
		d.add("gas.moisture", "Under pressure gas holds a few to some tens of per cent more water than an ideal gas would, so the true water is a little more. It matters little below 0.2 % of water.",
			"%.3g %% of water, worked out at %.3g bar as in an ideal gas", 100*g.Water, g.WaterAt/1e5)
	}
}

// bounds gives the properties at the first known duty with the lowest and the highest volume exponent, over what the
// remainder may be.
func (g Gas) bounds(ds []duty) (lo, hi gas.Props, ok bool) {
	for _, at := range ds {
		if at.err != nil {
			continue
		}
		for _, as := range rests {
			all, err := gas.RemainderSpread(g.Listed, []string{as}, at.line.Ps, at.line.Ts, at.line.Pd)
			if err != nil {
				continue // so heavy that it would condense: it cannot be that
			}
			if !ok || all[0].KV < lo.KV {
				lo = all[0]
			}
			if !ok || all[0].KV > hi.KV {
				hi = all[0]
			}
			ok = true
		}
		return lo, hi, ok
	}
	return lo, hi, false
}

// spread says in words what the guess of the remainder costs; empty when no duty is known.
func spread(lo, hi gas.Props, ok bool) string {
	if !ok {
		return ""
	}
	t := [2]float64{math.Min(lo.T2s, hi.T2s), math.Max(lo.T2s, hi.T2s)}
	return fmt.Sprintf("; were it another gas, the volume exponent would be %.3f to %.3f and loss-free discharge %.0f to %.0f °C",
		lo.KV, hi.KV, t[0]-273.15, t[1]-273.15)
}
