package duty

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lapwing/internal/measure"
)

// Change is how far one feature's expectation moved between two baselines, at one duty that both have seen: the middle
// of the older one, or the nearest to it that the newer one has seen.
type Change struct {
	Throw, Step   int
	Subject, Name string
	RPM, Ps, Pd   float64 // the duty
	Old, New      float64 // SI; NaN where only the other one has it
	Spreads       float64 // (New−Old) over the older block spread; NaN likewise
}

// Compare lists the features of the load steps that both baselines have, in the older one's order; then what only one of
// them has. Load steps that have no duty in common are left to Only.
func (b *Baseline) Compare(newer *Baseline) []Change {
	var out []Change
	nan := math.NaN()
	for i := range b.Cells {
		c := &b.Cells[i]
		d := newer.cell(c.Throw, c.Step, c.Inferred)
		if d == nil || c.Inferred {
			continue
		}
		at, ok := common(c, d)
		if !ok {
			continue
		}
		xo, xn := c.Shape.row(at), d.Shape.row(at)
		duty := Change{Throw: c.Throw, Step: c.Step, RPM: at[1], Ps: math.Exp(at[2]), Pd: math.Exp(at[2] + at[0])}
		for j := range c.Models {
			m := &c.Models[j]
			ch := duty
			ch.Subject, ch.Name, ch.Old, ch.New, ch.Spreads = m.Subject, m.Name, dot(&m.Coef, &xo), nan, nan
			if n := d.model(m.Subject, m.Name); n != nil {
				ch.New = dot(&n.Coef, &xn)
				ch.Spreads = (ch.New - ch.Old) / m.blockSpread(blockTurns)
			}
			out = append(out, ch)
		}
		for j := range d.Models {
			if n := &d.Models[j]; c.model(n.Subject, n.Name) == nil {
				ch := duty
				ch.Subject, ch.Name, ch.Old, ch.New, ch.Spreads = n.Subject, n.Name, nan, dot(&n.Coef, &xn), nan
				out = append(out, ch)
			}
		}
	}
	return out
}

// blockTurns is the block that spreads are stated for.
const blockTurns = 15

// common is a duty that both cells have seen.
func common(c, d *Cell) (at [numVars]float64, ok bool) {
	for v := range at {
		lo, hi := math.Max(c.Shape.Lo[v], d.Shape.Lo[v]), math.Min(c.Shape.Hi[v], d.Shape.Hi[v])
		if lo > hi {
			return at, false
		}
		at[v] = math.Min(math.Max(c.Shape.Centre[v], lo), hi)
	}
	return at, true
}

// Only says in plain words which load steps one baseline has and the other has not, or has at other duties.
func (b *Baseline) Only(newer *Baseline) (out []string) {
	for i := range b.Cells {
		c := &b.Cells[i]
		if c.Inferred {
			continue
		}
		d := newer.cell(c.Throw, c.Step, false)
		if d == nil {
			out = append(out, fmt.Sprintf("throw %d, load step %d: only in the older one", c.Throw+1, c.Step))
		} else if _, ok := common(c, d); !ok {
			out = append(out, fmt.Sprintf("throw %d, load step %d: learnt at duties that have nothing in common", c.Throw+1, c.Step))
		}
	}
	for i := range newer.Cells {
		if d := &newer.Cells[i]; !d.Inferred && b.cell(d.Throw, d.Step, false) == nil {
			out = append(out, fmt.Sprintf("throw %d, load step %d: only in the newer one", d.Throw+1, d.Step))
		}
	}
	return out
}

// Words tells a change in the unit that people read.
func (c Change) Words(layout measure.Layout) string {
	f := measure.Feature{Scale: 1, What: c.Name}
	if i := layout.Find(c.Subject, c.Name); i >= 0 {
		f = layout[i]
	}
	read := func(v float64) float64 { return v*f.Scale + f.Shift }
	switch {
	case math.IsNaN(c.Old):
		return fmt.Sprintf("%s %s: %.4g, not in the older one", c.Subject, c.Name, read(c.New))
	case math.IsNaN(c.New):
		return fmt.Sprintf("%s %s: was %.4g, not in the newer one", c.Subject, c.Name, read(c.Old))
	}
	way := "up"
	if c.New < c.Old {
		way = "down"
	}
	return fmt.Sprintf("%s %s: %.4g, was %.4g, %s by %.1f spreads: %s", c.Subject, c.Name, read(c.New), read(c.Old), way, math.Abs(c.Spreads), strings.TrimSuffix(f.What, "."))
}

// Largest sorts changes by how many spreads they are, largest first; those that only one baseline has come last.
func Largest(list []Change) []Change {
	out := slices.Clone(list)
	size := func(c Change) float64 {
		if math.IsNaN(c.Spreads) {
			return -1
		}
		return math.Abs(c.Spreads)
	}
	slices.SortStableFunc(out, func(a, b Change) int {
		switch x, y := size(a), size(b); {
		case x > y:
			return -1
		case x < y:
			return 1
		}
		return 0
	})
	return out
}
