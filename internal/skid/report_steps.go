package skid

import (
	"fmt"
	"strings"

	"lapwing/internal/crank"
)

func (p *page) steps(sk *Skid, ds []duty) {
	p.title("Load steps: the ideal cycle at the stated process values and %s rpm", short(sk.Machine.RatedRPM))
	fmt.Fprintln(p.w, "  Straight lines, tight valves, no losses: real openings come a little later, real loads differ by the valve losses.")
	if !sk.Process.Known {
		fmt.Fprintln(p.w, "  Not computed: the file gives no process values.")
	}
	for _, s := range sk.Steps {
		fmt.Fprintf(p.w, "\n  step %d: %s\n", s.Code, s.Name)
		ends := []string{row("end", "suction opens", "closes", "discharge opens", "closes", "volumetric efficiency", "indicated", "")}
		rods := []string{row("throw", "gas load", "pin load", "of rated", "pin reversal", "indicated", "mass flow")}
		for i := range sk.Throws {
			d := ds[sk.Throws[i].Stage-1]
			if d.err != nil {
				ends = append(ends, row(sk.Throws[i].ID, "not computed: "+d.err.Error()))
				continue
			}
			it := sk.ideal(i, s, d.line, d.gas)
			for e, end := range it.ends {
				if end.works {
					ends = append(ends, p.endRow(sk, i, e, s, end))
				}
			}
			rods = append(rods, rodRow(sk, i, it))
		}
		p.table(ends)
		if len(rods) > 1 {
			p.table(rods)
		}
	}
}

func (p *page) endRow(sk *Skid, i, e int, s Step, end idealEnd) string {
	name := sk.EndName(i, e)
	note := ""
	if v, ok := s.Pocket[name]; ok {
		note = f("pocket +%.4g %%, clearance %.4g l", v*100, end.clearance*1e3)
	}
	if v, ok := s.Late[name]; ok {
		note = strings.TrimPrefix(note+f(", suction held %s°", short(v)), ", ")
	}
	switch {
	case end.idle:
		return row(name, "–", "–", "–", "–", "–", "–", strings.TrimSuffix("idle, suction valves held open, "+note, ", "))
	case !end.delivers():
		return row(name, "–", "–", "–", "–", "–", "–", strings.TrimSuffix("delivers nothing, the clearance takes back all gas, "+note, ", "))
	}
	return row(name, deg(end.suctionOpens), deg(end.suctionCloses), deg(end.dischargeOpens), deg(end.dischargeCloses),
		f("%.1f %%", 100*end.ve), f("%.1f kW", end.work*sk.Machine.RatedRPM/60/1e3), note)
}

func rodRow(sk *Skid, i int, it idealThrow) string {
	span := func(r crank.Reversal) string { return f("+%.1f/−%.1f kN", r.MaxCompression/1e3, r.MaxTension/1e3) }
	return row(sk.Throws[i].ID, span(it.gas), span(it.pin), sk.Machine.shares(it), f("%.0f°, %.0f %%", it.pin.Longest, 100*it.pin.Share),
		f("%.1f kW", it.power/1e3), f("%.0f kg/h", it.flow*3600))
}
