package verdict

import (
	"math"
	"slices"

	"lapwing/internal/duty"
)

// felt is what temperatures say in one block.
type felt struct {
	group [4]vote
	valve [4]string // the valve whose cover stands out of its group, else ""
	cold  [4]bool   // covers are measured, and none is warmer than usual
	rings vote
	ofTd  float64 // z of the discharge temperature's excess, NaN where absent
}

// coverStands is the least departure of a cover from its group, in kelvin, that names a valve.
const coverStands = 3.0

// coverCold is the rise, in kelvin, below which no cover of a group is warmer.
const coverCold = 1.0

// acquit is all that a cold cover or pipe may say against a leak: small leaks warm little, and slowly.
const acquit = -0.5

func feel(p *place, dev []*duty.Deviation, settled bool) felt {
	widen := 1.0
	if !settled {
		widen = 3 // metal follows a load change in minutes, not turns
	}
	out := felt{rings: silent, ofTd: math.NaN()}
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
		out.rings = votes(out.ofTd)
		out.rings.least(acquit)
	}
	common := [2]float64{p.warmth(dev, suction), p.warmth(dev, discharge)}
	for h := range 4 {
		e, g := h/2, h%2
		out.group[h] = silent
		if !math.IsNaN(out.ofTd) { // both ends share the discharge pipe: it supports, it names nothing
			out.group[h] = votes(out.ofTd)
			out.group[h].least(acquit)
			out.group[h].most(1, "both ends share the discharge pipe")
		}
		best, bestZ := "", math.Inf(-1)
		bestK := 0.0
		for _, c := range p.ends[e].covers[g] {
			d := at(dev, c.at)
			if d == nil {
				continue
			}
			own := d.Residual - common[g]
			if z := own / d.Spread / widen; z > bestZ {
				best, bestZ, bestK = c.valve, z, own
			}
		}
		if best == "" {
			continue
		}
		out.cold[h] = settled && bestK < coverCold
		out.group[h] = votes(bestZ)
		out.group[h].least(acquit)
		if bestK < coverStands {
			out.group[h].most(0, "no cover stands 3 K out of its group")
		} else if bestZ > 3 {
			out.valve[h] = best
		}
	}
	return out
}

// warmth is what the covers of one kind of a throw share, K, never negative: the lower middle of their departures. Their
// stage is what they are compared with, and a leak in one valve warms the gas of its whole throw. 0 with a single cover.
func (p *place) warmth(dev []*duty.Deviation, g int) float64 {
	var k []float64
	for e := range p.ends {
		for _, c := range p.ends[e].covers[g] {
			if d := at(dev, c.at); d != nil {
				k = append(k, d.Residual)
			}
		}
	}
	if len(k) < 2 {
		return 0
	}
	slices.Sort(k)
	return math.Max(0, k[(len(k)-1)/2])
}
