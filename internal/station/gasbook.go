package station

import (
	"math"

	"lapwing/internal/gas"
	"lapwing/internal/skid"
)

// gasBook evaluates the gas per duty, so that a turn costs a look-up. Duties are rounded to a fixed lattice (1 % in
// pressure, 1 K): the properties of a turn then depend on its own duty only, not on what came before, and a clip
// reviewed on its own gives the live numbers again.
type gasBook struct {
	gas  gas.Gas
	page map[gasKey]gas.Props
}

type gasKey struct{ ps, pd, ts int }

const pageLimit = 4096 // duties kept; more than a machine's whole operating field at this rounding

func newGasBook(g skid.Gas) *gasBook {
	b := &gasBook{page: map[gasKey]gas.Props{}}
	if g.Mixture != nil {
		b.gas = g.Mixture
	} else if g.Fixed != nil {
		b.gas = g.Fixed
	}
	return b
}

// at gives the properties near a duty; ok is false when the gas cannot be evaluated there (unknown pressures,
// two-phase, out of range).
func (b *gasBook) at(ps, ts, pd float64) (gas.Props, bool) {
	if b.gas == nil || !(ps > 0 && pd > 0 && ts > 0) || math.IsInf(ps+pd+ts, 0) {
		return gas.Props{}, false
	}
	k := gasKey{int(math.Round(100 * math.Log(ps))), int(math.Round(100 * math.Log(pd))), int(math.Round(ts))}
	p, known := b.page[k]
	if !known {
		var err error
		if p, err = b.gas.Duty(math.Exp(float64(k.ps)/100), float64(k.ts), math.Exp(float64(k.pd)/100)); err != nil {
			p = gas.Props{}
		}
		if len(b.page) >= pageLimit {
			clear(b.page)
		}
		b.page[k] = p
	}
	return p, p.R > 0
}
