package skid

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"
	"unicode/utf8"
)

// Report writes what the machine was understood to be, for `lapwing check`: geometry, gas, expected angles and rod
// loads of every load step, channels, edges, the defaults in use, and every doubt. rate is the sampling rate in
// samples per second when it is known from elsewhere; 0 takes the file's. The error is the writer's.
func Report(w io.Writer, sk *Skid, rate float64) error {
	if rate > 0 {
		other := *sk
		other.Rate = rate
		sk = &other
	}
	var b bytes.Buffer
	p := &page{&b}
	p.head(sk)
	ds := sk.duties()
	p.gas(sk, ds)
	p.cylinders(sk)
	p.valves(sk)
	p.steps(sk, ds)
	p.worst(sk, ds)
	p.failed(sk, ds)
	p.sampling(sk)
	p.channels(sk)
	p.edges(sk)
	p.modbus(sk)
	p.defaults(sk)
	p.doubts(sk, ds)
	if _, err := w.Write(b.Bytes()); err != nil {
		return fmt.Errorf("skid: report: %w", err)
	}
	return nil
}

// page writes aligned text.
type page struct{ w io.Writer }

func (p *page) title(format string, args ...any) {
	fmt.Fprintf(p.w, "\n"+format+"\n", args...)
}

// table aligns rows of cells that are parted by tabs.
func (p *page) table(rows []string) {
	var b bytes.Buffer
	t := tabwriter.NewWriter(&b, 0, 0, 2, ' ', 0)
	for _, r := range rows {
		fmt.Fprintln(t, "  "+r)
	}
	t.Flush() // into memory: cannot fail
	for _, line := range strings.Split(strings.TrimRight(b.String(), "\n"), "\n") {
		fmt.Fprintln(p.w, strings.TrimRight(line, " "))
	}
}

// wrapped writes text in lines of at most width characters, indent included.
func (p *page) wrapped(text, indent string, width int) {
	line := indent
	for _, word := range strings.Fields(text) {
		if line != indent && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(word) > width {
			fmt.Fprintln(p.w, line)
			line = indent
		}
		if line != indent {
			line += " "
		}
		line += word
	}
	fmt.Fprintln(p.w, line)
}

// row joins cells.
func row(cells ...string) string { return strings.Join(cells, "\t") }

func f(format string, args ...any) string { return fmt.Sprintf(format, args...) }

func bar(pa float64) string {
	if math.IsNaN(pa) {
		return "not known"
	}
	return f("%.4g bar", pa/1e5)
}

func celsius(k float64) string {
	if math.IsNaN(k) {
		return "not known"
	}
	return f("%.0f °C", k-273.15)
}

func deg(v float64) string {
	if math.IsNaN(v) {
		return "–"
	}
	return f("%.1f°", v)
}

// known writes a number that is 0 when it is not known.
func known(v float64, format string) string {
	if v == 0 || math.IsNaN(v) {
		return "not stated"
	}
	return f(format, v)
}

func (p *page) head(sk *Skid) {
	m, ph := sk.Machine, sk.Phase
	fmt.Fprintf(p.w, "%s: %s\n", sk.ID, sk.Name)
	edge := "rising"
	if ph.Falling {
		edge = "falling"
	}
	threshold := "threshold found from the signal"
	if !ph.AutoLevel {
		threshold = f("threshold %s V", short(ph.Threshold))
	}
	rows := []string{}
	if sk.Site != "" {
		rows = append(rows, row("site", sk.Site))
	}
	rows = append(rows,
		row("file", f("%s, sha256 %.12s…", sk.File, sk.Hash)),
		row("speed", f("%s rpm rated, %s to %s", short(m.RatedRPM), short(m.MinRPM), short(m.MaxRPM))),
		row("atmosphere", bar(m.Atmosphere)+" absolute"),
		row("rated rod load", f("compression %s, tension %s", known(m.RodLoadCompression/1e3, "%.4g kN"), known(m.RodLoadTension/1e3, "%.4g kN"))),
		row("shaft mark", f("channel %s, %s edge, %s", ph.Channel, edge, threshold)),
	)
	if m.GasLoadCompression+m.GasLoadTension > 0 {
		rows = append(rows, row("rated gas load", f("compression %s, tension %s", known(m.GasLoadCompression/1e3, "%.4g kN"), known(m.GasLoadTension/1e3, "%.4g kN"))))
	}
	if ph.Wheel.Teeth > 0 {
		rows = append(rows, row("toothed wheel", f("%v, %d teeth a turn; a turn opens with the first tooth after the index", ph.Wheel, ph.Wheel.Marks())))
	}
	for _, h := range ph.Ripple {
		rows = append(rows, row("ripple", harmonic(h)))
	}
	if sk.ComputesRipple() {
		rows = append(rows, row("ripple", f("computed from the torque of all throws and %s kg m² of inertia", short(m.Inertia))))
	}
	for _, s := range sk.Steps {
		for _, h := range s.Ripple {
			rows = append(rows, row(f("ripple, step %d", s.Code), harmonic(h)))
		}
	}
	rows = append(rows, row("angle uncertainty", known(ph.Uncertainty, "±%.2g° for 95 of 100 angles")))
	p.table(rows)
}

func harmonic(h Ripple) string {
	return f("order %d: %s %% at %s°", h.Order, short(h.Amp*100), short(h.Phase))
}

func (p *page) gas(sk *Skid, ds []duty) {
	p.title("Gas: %s", sk.Gas.Name)
	var rows []string
	if m := sk.Gas.Mixture; m != nil {
		if m.Note != "" {
			rows = append(rows, row("taken as", m.Note))
		}
		var parts []string
		for _, c := range m.Composition() {
			parts = append(parts, f("%s %.4g %%", c.Name, c.X*100))
		}
		rows = append(rows, row("composition", strings.Join(parts, ", ")), row("molar mass", f("%.2f g/mol", m.M()*1e3)))
	} else if g := sk.Gas.Fixed; g != nil {
		rows = append(rows, row("given by numbers", f("molar mass %.2f g/mol", g.M*1e3)))
	}
	for n := 1; n <= sk.Stages(); n++ {
		l, g := ds[n-1].line, ds[n-1].gas
		if err := ds[n-1].err; err != nil {
			rows = append(rows, row(f("stage %d", n), err.Error()))
			continue
		}
		rows = append(rows,
			row(f("stage %d", n), f("%s %s → %s absolute, ratio %.2f", bar(l.Ps), celsius(l.Ts), bar(l.Pd), l.Pd/l.Ps)),
			row("", f("Z %.4f suction, %.4f discharge; volume exponent %.4f, temperature exponent %.4f", g.Zs, g.Zd, g.KV, g.KT)),
			row("", f("loss-free discharge temperature %s", celsius(g.T2s))))
		if math.Abs(g.KVd-g.KVs) > 0.02 {
			rows = append(rows, row("", f("%.3f at suction and %.3f at discharge: the closed strokes of a sound machine are bent a little", g.KVs, g.KVd)))
		}
		if g.Wet {
			rows = append(rows, row("", "some of its water condenses at suction; computed as if it stayed vapour"))
		}
	}
	p.table(rows)
}

func (p *page) cylinders(sk *Skid) {
	p.title("Cylinders (all pockets closed)")
	rows := []string{row("throw", "stage", "dead centre", "bore", "stroke", "rods", "conn. rod / radius", "piston speed", "masses")}
	for _, t := range sk.Throws {
		c := t.Cylinder
		rods := f("%s mm", short(c.PistonRod*1e3))
		if c.TailRod > 0 {
			rods += f(" and %s mm tail", short(c.TailRod*1e3))
		}
		rows = append(rows, row(t.ID, f("%d", t.Stage), f("%s° after the mark", short(t.DeadCentre)),
			f("%s mm", short(c.Bore*1e3)), f("%s mm", short(c.Stroke*1e3)), rods, f("%.2f", c.ConRod/c.Radius()),
			f("%.2f m/s", c.MeanPistonSpeed(sk.Machine.RatedRPM)),
			f("%s + %s", known(c.MassPiston, "%.4g kg"), known(c.MassCrosshead, "%.4g kg"))))
	}
	p.table(rows)
	fmt.Fprintln(p.w)
	rows = []string{row("end", "piston area", "swept", "clearance", "displacement at rated speed", "pressure channel")}
	for i, t := range sk.Throws {
		for e, end := range t.Ends {
			if !end.Works {
				at := "at the atmosphere"
				if t.BlindAtSuction {
					at = "at suction pressure"
				}
				rows = append(rows, row(sk.EndName(i, e), "blind, "+at))
				continue
			}
			c := t.Cylinder
			ch := end.Pressure
			if ch == "" {
				ch = "none"
			}
			rows = append(rows, row(sk.EndName(i, e), f("%.2f cm²", c.Area(e)*1e4), f("%.4g l", c.Swept(e)*1e3),
				f("%.4g l (%.4g %%)", c.ClearanceVolume(e)*1e3, c.Clearance[e]*100),
				f("%.4g m³/h", c.Swept(e)*sk.Machine.RatedRPM*60), ch))
		}
	}
	p.table(rows)
}

func (p *page) valves(sk *Skid) {
	p.title("Valves")
	rows := []string{row("group", "valves", "flow area", "of piston", "lift", "cover temperatures")}
	for i, t := range sk.Throws {
		for e, end := range t.Ends {
			for k, g := range [2][]Valve{end.Suction, end.Discharge} {
				if len(g) == 0 {
					continue
				}
				var ids, covers []string
				area := 0.0
				for _, v := range g {
					ids = append(ids, v.ID[strings.LastIndexByte(v.ID, '.')+1:])
					area += v.FlowArea
					if v.Cover == "" {
						covers = append(covers, "none")
					} else {
						covers = append(covers, v.Cover)
					}
				}
				share := "–"
				if area > 0 {
					share = f("%.1f %%", 100*area/t.Cylinder.Area(e))
				}
				rows = append(rows, row(sk.EndName(i, e)+"."+[2]string{"suction", "discharge"}[k], strings.Join(ids, " "),
					known(area*1e4, "%.4g cm²"), share, known(g[0].Lift*1e3, "%.3g mm"), strings.Join(covers, " ")))
			}
		}
	}
	p.table(rows)
}

func (p *page) doubts(sk *Skid, ds []duty) {
	all := doubtsAt(sk, ds)
	if len(all) == 0 {
		p.title("No doubts.")
	} else {
		p.title("Doubts (%d): possible, but odd", len(all))
	}
	for _, d := range all {
		fmt.Fprintf(p.w, "  line %d, %s: %s.\n", d.Line, d.Path, d.Msg)
		p.wrapped(d.Fix, "      ", 110)
	}
	fmt.Fprintln(p.w, "\nMonitoring only: never a substitute for protection. Isolate, depressurise and lock out before touching a transducer,\na valve or a cover; site permits, local codes and licensed practice apply.")
}
