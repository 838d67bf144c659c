package station

import (
	"math"

	"lapwing/internal/gas"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
)

// gasBook evaluates the gas per duty, so that a turn costs a look-up. Duties are rounded to a fixed lattice (1 % in
// pressure, 1 K): the properties of a turn then depend on its own duty only, not on what came before, and a clip
// reviewed on its own gives the live numbers again.
type gasBook struct {
	gas  gas.Gas
	page map[gasKey]*gasPage
}

// gasPage is what is known at one duty.
type gasPage struct {
	props gas.Props
	mea   measure.Gas
}

var noPage gasPage // of a duty that cannot be evaluated; never written

type gasKey struct{ ps, pd, ts int }

const pageLimit = 4096 // duties kept; more than a machine's whole operating field at this rounding

func newGasBook(g skid.Gas) *gasBook {
	b := &gasBook{page: map[gasKey]*gasPage{}}
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
	p := b.read(ps, ts, pd)
	return p.props, p.props.R > 0
}

// measures gives what the measures need of the gas there.
func (b *gasBook) measures(ps, ts, pd float64) (measure.Gas, bool) {
	p := b.read(ps, ts, pd)
	return p.mea, p.mea.R > 0
}

func (b *gasBook) read(ps, ts, pd float64) *gasPage {
	if b.gas == nil || !(ps > 0 && pd > 0 && ts > 0) || math.IsInf(ps+pd+ts, 0) {
		return &noPage
	}
	k := gasKey{int(math.Round(100 * math.Log(ps))), int(math.Round(100 * math.Log(pd))), int(math.Round(ts))}
	p := b.page[k]
	if p == nil {
		p = new(gasPage)
		ps, ts, pd = math.Exp(float64(k.ps)/100), float64(k.ts), math.Exp(float64(k.pd)/100)
		if props, err := b.gas.Duty(ps, ts, pd); err == nil {
			p.props = props
		}
		if mea, err := measure.NewGas(b.gas, ps, ts, pd); err == nil {
			p.mea = mea
		}
		if len(b.page) >= pageLimit {
			clear(b.page)
		}
		b.page[k] = p
	}
	return p
}
