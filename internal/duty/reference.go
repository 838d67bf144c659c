package duty

import (
	"fmt"
	"math"

	"lapwing/internal/measure"
)

// Reference is a baseline bound to a layout, ready to be asked.
type Reference struct {
	layout measure.Layout
	b      *Baseline
	cells  []bound
}

type bound struct {
	*Cell
	features []int    // of the throw, in layout order
	models   []*Model // aligned to features, nil where none was learnt
}

// Reference binds the baseline. Features that the layout has and the baseline has not are never seen.
func (b *Baseline) Reference(layout measure.Layout) (*Reference, error) {
	if h := layoutHash(layout); h != b.LayoutHash {
		return nil, fmt.Errorf("duty: the baseline was learnt with other features (layout %s, now %s): learn again", b.LayoutHash, h)
	}
	r := &Reference{layout: layout, b: b}
	for i := range b.Cells {
		c := bound{Cell: &b.Cells[i]}
		for j, f := range layout {
			if f.Throw == c.Throw && !f.Display {
				c.features = append(c.features, j)
				c.models = append(c.models, c.model(f.Subject, f.Name))
			}
		}
		r.cells = append(r.cells, c)
	}
	return r, nil
}

// Layout gives the layout it is bound to.
func (r *Reference) Layout() measure.Layout { return r.layout }

// Baseline gives the baseline behind it.
func (r *Reference) Baseline() *Baseline { return r.b }

func (r *Reference) find(throw int, p Point) *bound {
	for i := range r.cells {
		if c := &r.cells[i]; c.Throw == throw && c.Step == p.Step && c.Inferred == p.Inferred {
			return c
		}
	}
	return nil
}

// Seen tells whether a throw's duty can be judged, and if not why, in plain words.
func (r *Reference) Seen(throw int, p Point) (bool, string) {
	c := r.find(throw, p)
	if c == nil {
		if p.Inferred {
			return false, fmt.Sprintf("load step %d without process values was not learnt", p.Step)
		}
		return false, fmt.Sprintf("load step %d was not learnt", p.Step)
	}
	v := vars(p.RPM, p.Ps, p.Pd)
	for i := range v {
		if !known(v[i]) {
			return false, "speed or pressures are not known"
		}
	}
	if i, ok := c.Shape.inside(v); !ok {
		lo, hi := c.Shape.Lo[i], c.Shape.Hi[i]
		switch i {
		case 0:
			return false, fmt.Sprintf("pressure ratio %.2f is outside what was learnt (%.2f to %.2f)", math.Exp(v[0]), math.Exp(lo), math.Exp(hi))
		case 1:
			return false, fmt.Sprintf("speed %.0f rpm is outside what was learnt (%.0f to %.0f)", v[1], lo, hi)
		default:
			return false, fmt.Sprintf("suction pressure %.2f bar is outside what was learnt (%.2f to %.2f)", math.Exp(v[2])/1e5, math.Exp(lo)/1e5, math.Exp(hi)/1e5)
		}
	}
	x := c.Shape.row(v)
	if leverage(&c.Inverse, &x) > c.MaxLev {
		return false, "this combination of ratio, speed and suction pressure was not learnt"
	}
	return true, ""
}

// Deviate appends to dst one Deviation per feature of the throw that has a value; in layout order. Where the duty was
// not seen, Seen is false and Expected, Residual, Spread and Z are NaN.
func (r *Reference) Deviate(dst []Deviation, throw int, p Point, v *measure.Vector) []Deviation {
	seen, _ := r.Seen(throw, p)
	if !seen {
		nan := math.NaN()
		for i, f := range r.layout {
			if f.Throw == throw && i < len(v.V) && known(v.V[i]) {
				dst = append(dst, Deviation{Feature: i, Value: v.V[i], Expected: nan, Residual: nan, Spread: nan, Z: nan, N: 1})
			}
		}
		return dst
	}
	c := r.find(throw, p)
	d := vars(p.RPM, p.Ps, p.Pd)
	x := c.Shape.row(d)
	for k, i := range c.features {
		if i >= len(v.V) || !known(v.V[i]) {
			continue
		}
		dev := Deviation{Feature: i, Value: v.V[i], N: 1}
		m := c.models[k]
		if m == nil || !within(m, d) {
			dev.Expected, dev.Residual, dev.Spread, dev.Z = math.NaN(), math.NaN(), math.NaN(), math.NaN()
		} else {
			dev.Seen = true
			dev.Expected = dot(&m.Coef, &x)
			dev.Residual = dev.Value - dev.Expected
			dev.Spread = math.Hypot(m.Spread, m.Sys)
			dev.Z = dev.Residual / dev.Spread
		}
		dst = append(dst, dev)
	}
	return dst
}

func within(m *Model, d [numVars]float64) bool {
	for i := range d {
		if !(d[i] >= m.Lo[i] && d[i] <= m.Hi[i]) {
			return false
		}
	}
	return true
}

// modelOf finds a feature's model at a duty, nil when there is none.
func (r *Reference) modelOf(throw int, p Point, feature int) *Model {
	c := r.find(throw, p)
	if c == nil {
		return nil
	}
	for k, i := range c.features {
		if i == feature {
			return c.models[k]
		}
	}
	return nil
}
