package duty

import (
	"fmt"
	"slices"
	"strings"

	"lapwing/internal/measure"
)

// Touched lists the features that work on a part of the machine makes worthless, in layout order. Subjects:
//
//	t1                  a throw: all of it
//	t1.he               an end, or its pressure transducer: what stands on that pressure, its groups, the cylinder's leak areas
//	t1.he.suction       a valve group (t1.he.s1: one valve of it): its own events and covers, what stands on the pressure of
//	                    that end, the leak areas and the sums of the cylinder, since all of them are fitted together
//	t1.rings, t1.packing  what stands on both ends' pressures (packing: the crank end's), the cylinder's leak areas and sums
//	t1.vibration        an accelerometer: everything that it hears
//
// Impacts of the other groups, other covers, other cylinders stay as they are.
func Touched(layout measure.Layout, subject string) ([]int, error) {
	parts := strings.Split(subject, ".")
	throw := -1
	for _, f := range layout {
		if id, _, _ := strings.Cut(f.Subject, "."); id == parts[0] {
			throw = f.Throw
		}
	}
	bad := fmt.Errorf("duty: renew %q: no such part; write t1, t1.he, t1.he.suction, t1.he.s1, t1.rings, t1.packing or t1.vibration", subject)
	if throw < 0 || len(parts) > 3 {
		return nil, bad
	}
	var ends [2]bool // whose pressure features are touched
	group := ""      // whose own features are
	whole, ears := false, false
	switch {
	case len(parts) == 1:
		whole = true
	case len(parts) == 2 && parts[1] == "rings":
		ends = [2]bool{true, true}
		group = subject
	case len(parts) == 2 && parts[1] == "packing":
		ends[1] = true
		group = parts[0] + ".rings"
	case len(parts) == 2 && parts[1] == "vibration":
		ears = true
	case parts[1] == endNames[0] || parts[1] == endNames[1]:
		ends = [2]bool{parts[1] == endNames[0], parts[1] == endNames[1]}
		group = parts[0] + "." + parts[1]
		if len(parts) == 3 {
			kind, ok := groupOf(parts[2])
			if !ok {
				return nil, bad
			}
			group += "." + kind
		}
	default:
		return nil, bad
	}
	var out []int
	for i, f := range layout {
		if f.Throw != throw || f.Display {
			continue
		}
		if whole || ears && f.Class == measure.Vibration || !ears && (under(f.Subject, group) || stands(f, parts[0], ends)) {
			out = append(out, i)
		}
	}
	if len(out) == 0 {
		return nil, bad
	}
	return out, nil
}

// groupOf takes suction, discharge, or a valve's short name s1, d2.
func groupOf(part string) (string, bool) {
	for _, g := range groupNames {
		if part == g || len(part) > 1 && part[0] == g[0] && strings.Trim(part[1:], "0123456789") == "" {
			return g, true
		}
	}
	return "", false
}

// under tells whether a subject belongs to a group or an end: its events, its leak path, its valves' covers.
func under(subject, group string) bool {
	if subject == group || strings.HasPrefix(subject, group+".") {
		return true
	}
	parts := strings.Split(subject, ".")
	if len(parts) == 3 {
		if kind, ok := groupOf(parts[2]); ok {
			return parts[0]+"."+parts[1]+"."+kind == group
		}
	}
	return false
}

// stands tells whether a feature stands on the pressure of one of the ends: the ends' own, the throw's sums and loads,
// and the areas of all five paths.
func stands(f measure.Feature, throw string, ends [2]bool) bool {
	switch f.Subject {
	case throw:
		return true
	case throw + "." + endNames[0]:
		return ends[0]
	case throw + "." + endNames[1]:
		return ends[1]
	}
	return f.Name == "leak_percent" || f.Name == "leak_area_mm2"
}

// Without gives the baseline without some features: they are then never seen. It shares no memory that changes.
func (b *Baseline) Without(layout measure.Layout, touched []int) *Baseline {
	c := *b
	c.Cells = slices.Clone(b.Cells)
	for i := range c.Cells {
		c.Cells[i].Models = slices.DeleteFunc(slices.Clone(c.Cells[i].Models), func(m Model) bool {
			return slices.Contains(touched, layout.Find(m.Subject, m.Name))
		})
	}
	return &c
}

// renew gives the older baseline with the touched features learnt anew, load step by load step. The duty's influence is
// taken from the older one as far as the new turns do not show another, and a feature is used only where it has been
// seen since. Load steps that were not run since have nothing of the touched features.
func (l *Learner) renew(b *Baseline) error {
	touched := l.touched
	for i := range b.Cells {
		cell := &b.Cells[i]
		fresh := l.find(cell.Throw, cell.Step, cell.Inferred)
		if fresh == nil || len(fresh.turn) < l.cfg.MinTurns {
			continue
		}
		x := make([][numTerms]float64, len(fresh.duty))
		for j, d := range fresh.duty {
			x[j] = cell.Shape.row(d)
		}
		prior := l.over.cell(cell.Throw, cell.Step, cell.Inferred)
		for k, f := range fresh.features {
			if !slices.Contains(touched, f) || cell.model(l.layout[f].Subject, l.layout[f].Name) != nil {
				continue
			}
			m, ok, err := fresh.fitFeature(l.layout[f], k, x, prior.model(l.layout[f].Subject, l.layout[f].Name))
			if err != nil {
				return fmt.Errorf("%s %s: %w", l.layout[f].Subject, l.layout[f].Name, err)
			}
			if ok {
				cell.Models = append(cell.Models, m)
			}
		}
		at := map[string]int{}
		for i, f := range l.layout {
			at[f.Subject+" "+f.Name] = i
		}
		slices.SortStableFunc(cell.Models, func(a, b Model) int { return at[a.Subject+" "+a.Name] - at[b.Subject+" "+b.Name] })
	}
	return nil
}

func (l *Learner) find(throw, step int, inferred bool) *lesson {
	for _, c := range l.cells {
		if c.throw == throw && c.step == step && c.inferred == inferred {
			return c
		}
	}
	return nil
}
