package verdict

import (
	"strings"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// Group indexes of an end.
const (
	suction   = 0
	discharge = 1
)

var groupName = [2]string{"suction", "discharge"}
var endName = [2]string{crank.HE: "he", crank.CE: "ce"}
var endWords = [2]string{crank.HE: "head end", crank.CE: "crank end"}

// place says where a throw's features stand in the layout; -1 where there is none.
type place struct {
	id     string
	ends   [2]endPlace
	rings  pathPlace
	pin    [2]int // angles at which the pin load changes its sign
	exists bool
}

type endPlace struct {
	works  bool
	f      [patternLen]int
	ratio  int
	excess int
	power  int
	loss   [2]int
	path   [2]pathPlace
	impact [2][2]int // group; opens (the slope's share taken out), closes
	plain  [2]int    // opening, the slope's share left in
	peak   [2]int    // opening, of both events where its window is shared
	hits   [2]int    // after the opening
	lag    [2]int    // opening
	onset  [2]int    // opening
	open   [2]int    // angle of opening as the pressure shows it
	late   [2]int    // the same by the plateau's crossing, less a sealed cylinder's
	covers [2][]coverPlace
}

type pathPlace struct{ area, percent, noise, shape int }

type coverPlace struct {
	valve string
	at    int
}

func places(l measure.Layout) []place {
	n := 0
	for _, f := range l {
		n = max(n, f.Throw+1)
	}
	out := make([]place, n)
	for t := range out {
		p := &out[t]
		for _, f := range l {
			if f.Throw == t {
				p.id, _, _ = strings.Cut(f.Subject, ".")
				p.exists = true
				break
			}
		}
		paths := func(subject string) pathPlace {
			return pathPlace{l.Find(subject, "leak_area_mm2"), l.Find(subject, "leak_percent"), l.Find(subject, "leak_noise_db"), l.Find(subject, "leak_shape")}
		}
		p.rings = paths(p.id + ".rings")
		p.pin = [2]int{l.Find(p.id, "pin_pulls_deg"), l.Find(p.id, "pin_pushes_deg")}
		for e := range p.ends {
			ep := &p.ends[e]
			s := p.id + "." + endName[e]
			for i, name := range patternNames {
				ep.f[i] = l.Find(s, name)
				ep.works = ep.works || ep.f[i] >= 0
			}
			ep.ratio, ep.excess, ep.power = l.Find(s, "ratio_plateau"), l.Find(s, "t_excess_k"), l.Find(s, "indicated_power_kw")
			for g, name := range groupName {
				ep.loss[g] = l.Find(s, name+"_loss_kw")
				ep.path[g] = paths(s + "." + name)
				ep.impact[g] = [2]int{l.Find(s+"."+name+".opens", "impact_norm_ln"), l.Find(s+"."+name+".closes", "impact_ln")}
				ep.plain[g], ep.hits[g] = l.Find(s+"."+name+".opens", "impact_ln"), l.Find(s+"."+name+".opens", "extra_hits_45")
				ep.peak[g] = l.Find(s+"."+name+".opens", "peak_g")
				ep.onset[g] = l.Find(s+"."+name+".opens", "onset_deg")
				ep.open[g], ep.late[g] = l.Find(s, name+"_opens_deg"), l.Find(s, name+"_opens_late_deg")
				ep.lag[g] = l.Find(s+"."+name+".opens", "lag_ms")
			}
		}
		for i, f := range l {
			if f.Throw != t || f.Name != "cover_above_group_k" || f.End < 0 || f.End > 1 {
				continue
			}
			// <throw>.<end>.<s|d><n>
			last := f.Subject[strings.LastIndexByte(f.Subject, '.')+1:]
			g := suction
			if strings.HasPrefix(last, "d") {
				g = discharge
			}
			p.ends[f.End].covers[g] = append(p.ends[f.End].covers[g], coverPlace{f.Subject, i})
		}
	}
	return out
}

// struck is the deviation of an opening's impact: without the share of the pressure slope where that is known.
func (ep *endPlace) struck(g int, dev []*duty.Deviation) *duty.Deviation {
	if d := at(dev, ep.impact[g][0]); d != nil {
		return d
	}
	return at(dev, ep.plain[g])
}

// group gives the name of a valve group.
func (p *place) group(end, g int) string { return p.id + "." + endName[end] + "." + groupName[g] }

// path gives the name of a leak's path.
func (p *place) path(h int) string {
	if h == hRings {
		return p.id + ".rings"
	}
	return p.group(h/2, h%2)
}
