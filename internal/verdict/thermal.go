package verdict

import (
	"math"

	"lapwing/internal/duty"
)

// felt is what temperatures say in one block.
type felt struct {
	group [4]float64 // NaN where absent
	valve [4]string  // the valve whose cover stands out of its group, else ""
	rings float64
	ofTd  float64 // z of the discharge temperature's excess, NaN where absent
}

// coverStands is the least departure of a cover from its group, in kelvin, that names a valve.
const coverStands = 3.0

// acquit is all that a cold cover or pipe may say against a leak: small leaks warm little, and slowly.
const acquit = -0.5

func feel(p *place, dev []*duty.Deviation, settled bool) felt {
	widen := 1.0
	if !settled {
		widen = 3 // metal follows a load change in minutes, not turns
	}
	out := felt{rings: math.NaN(), ofTd: math.NaN()}
	n := 0.0
	for e := range p.ends {
		if d := at(dev, p.ends[e].excess); d != nil {
			if math.IsNaN(out.ofTd) {
				out.ofTd = 0
			}
			out.ofTd += d.Z / widen
			n++
		}
	}
	if n > 0 {
		out.ofTd /= n
		out.rings = math.Max(acquit, capped(llr(out.ofTd)))
	}
	for h := range 4 {
		e, g := h/2, h%2
		out.group[h] = math.NaN()
		if !math.IsNaN(out.ofTd) { // both ends share the discharge pipe: it supports, it names nothing
			out.group[h] = math.Max(acquit, math.Min(1, llr(out.ofTd)))
		}
		best, bestZ := "", math.Inf(-1)
		bestK := 0.0
		for _, c := range p.ends[e].covers[g] {
			if d := at(dev, c.at); d != nil && d.Z/widen > bestZ {
				best, bestZ, bestK = c.valve, d.Z/widen, d.Residual
			}
		}
		if best == "" {
			continue
		}
		out.group[h] = math.Max(acquit, capped(llr(bestZ)))
		if bestK < coverStands {
			out.group[h] = math.Min(0, out.group[h])
		} else if bestZ > 3 {
			out.valve[h] = best
		}
	}
	return out
}
