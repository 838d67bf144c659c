package duty

import (
	"fmt"
	"math"
	"strings"

	"lapwing/internal/measure"
)

// Doubt is a sign in a learning run that the machine was not healthy while it was learnt: physics that needs no baseline.
type Doubt struct {
	Subject  string   `json:"subject"`
	Step     int      `json:"step"` // load step
	Text     string   `json:"text"`
	Evidence []string `json:"evidence"`
}

func (d Doubt) String() string {
	return fmt.Sprintf("%s, load step %d: %s (%s)", d.Subject, d.Step, d.Text, strings.Join(d.Evidence, "; "))
}

// What healthy cylinders show at most, for the examination of a learning run. Wall heat reads as a leak of 0.7 to 4.4 %
// of throughput on every valve alike (reference/leaks.md section 1, five modelled machines), so that one group of a
// cylinder is held against the same group of the other end, where the heat is nearly the same; the ring area is
// absolute. The scales are what the three example machines' ends and twins differ by when healthy, rounded up.
const (
	apartPercent  = 0.45  // of throughput, between the same groups of two ends
	apartExponent = 0.005 // between two ends, of n_comp_late − n_exp_late
	apartNoise    = 1.2   // dB
	apartBalance  = 0.006 // flow balance
	aloneSure     = 2.5   // scales at which the areas alone are a doubt
	withOthers    = 1.5   // scales at which they are one with a second witness
	witness       = 1.5   // scales at which another measure is a witness

	mostPercent  = 5.0  // of throughput, of a valve group: the most that wall heat reads, and a little
	mostRings    = 4.0  // of throughput
	mostExponent = 0.05 // late exponents from the gas's own
	mostBalance  = 0.04 // flow balance from 1
	mostHot      = 15.0 // K above the adiabatic discharge temperature
	mostZero     = 0.03 // pressure zero, share of suction pressure
)

// What an end without a like may show, suction and discharge: how much more than its other group, per cent of
// throughput, and how far its late exponents may lie apart in the leak's direction.
var (
	aloneMore     = [2]float64{2.0, 0.8}
	aloneExponent = [2]float64{0.015, 0.008}
)

// Examine looks for a fault that was there already while a baseline was learnt: areas, late exponents, flow balance, leak
// noise, discharge temperature, each held against the other end, the twin throw of the stage, or an absolute limit. k
// gives the gas's volume exponent at a throw's duty; NaN where it is not known, then the exponents are not held against
// it.
//
// A fault that is equal in both ends of a cylinder and in its twins is seen only above the absolute limits.
func (b *Baseline) Examine(layout measure.Layout, k func(throw int, rpm, ps, pd float64) float64) []Doubt {
	var out []Doubt
	for i := range b.Cells {
		c := &b.Cells[i]
		if c.Inferred {
			continue
		}
		x := examined{c: c, layout: layout}
		mid := c.Shape.Centre
		ps := math.Exp(mid[2])
		gasK := math.NaN()
		if k != nil {
			gasK = k(c.Throw, mid[1], ps, ps*math.Exp(mid[0]))
		}
		for e := range 2 {
			for g := range groupNames {
				if d, ok := x.group(b, e, g); ok {
					out = append(out, d)
				}
			}
			out = append(out, x.end(e, gasK, ps)...)
		}
		if d, ok := x.rings(); ok {
			out = append(out, d)
		}
	}
	return out
}

var (
	groupNames = [2]string{"suction", "discharge"}
	endNames   = [2]string{"he", "ce"}
)

// examined is a cell whose expectations in the middle of what it has seen are asked for.
type examined struct {
	c      *Cell
	layout measure.Layout
}

func (x *examined) throwID() string {
	for _, f := range x.layout {
		if f.Throw == x.c.Throw {
			id, _, _ := strings.Cut(f.Subject, ".")
			return id
		}
	}
	return ""
}

// at gives what people read of a feature in the middle of the cell; NaN when it was not learnt.
func (x *examined) at(part, name string) float64 {
	subject := x.throwID() + part
	m := x.c.model(subject, name)
	if m == nil {
		return math.NaN()
	}
	f := &x.layout[x.layout.Find(subject, name)]
	row := x.c.Shape.row(x.c.Shape.Centre)
	return dot(&m.Coef, &row)*f.Scale + f.Shift
}

// signs are what a leak of a group does to the measures: suction lowers the late compression exponent, raises the late
// expansion exponent and the flow balance; discharge the other way round (reference/methods.md).
var signs = [2]float64{-1, 1}

// group holds one valve group against the same group of the other end, and of the other throws of its stage.
func (x *examined) group(b *Baseline, end, g int) (Doubt, bool) {
	own := "." + endNames[end]
	area := x.at(own+"."+groupNames[g], "leak_percent")
	if math.IsNaN(area) {
		return Doubt{}, false
	}
	if g == 0 && x.works(1-end) && math.IsNaN(x.at(".rings", "leak_percent")) {
		return Doubt{}, false // valves closing late on both ends: what the rings leak reads on the suction groups (leaks.md section 2)
	}
	subject := x.throwID() + own + "." + groupNames[g]
	d := Doubt{Subject: subject, Step: x.c.Step}
	if area > mostPercent {
		d.Text = "it may leak already"
		d.Evidence = []string{fmt.Sprintf("leak area reads %.1f %% of throughput, wall heat explains %.1f %% at the most", area, mostPercent)}
		return d, true
	}
	likes := x.likes(b, end)
	if len(likes) == 0 {
		return x.alone(d, end, g)
	}
	for _, o := range likes {
		part := "." + endNames[o.end]
		their := o.x.at(part+"."+groupNames[g], "leak_percent")
		if math.IsNaN(their) {
			continue
		}
		name := o.x.throwID() + part + "." + groupNames[g]
		mine, others := x.perStroke(own, o.x, part)
		more := (area*mine - their*others) / apartPercent
		ev := []string{fmt.Sprintf("leak area reads %.1f %% of throughput, %s %.1f %%", area, name, their)}
		say := func(scales float64, format string, a ...any) {
			if scales >= witness {
				ev = append(ev, fmt.Sprintf(format, a...))
			}
		}
		n := func(x *examined, part string) float64 { return x.at(part, "n_comp_late") - x.at(part, "n_exp_late") }
		a, c := n(x, own), n(o.x, part)
		say(signs[g]*(a-c)/apartExponent, "late exponents, compression less expansion, %+.3f against %+.3f", a, c)
		a, c = x.at(own, "flow_balance"), o.x.at(part, "flow_balance")
		say(-signs[g]*(a-c)/apartBalance, "flow balance %.3f against %.3f", a, c)
		a, c = x.at(own+"."+groupNames[g], "leak_noise_db"), o.x.at(part+"."+groupNames[g], "leak_noise_db")
		say((a-c)/apartNoise, "leak noise %+.1f dB against %+.1f dB", a, c)
		if more >= aloneSure || more >= withOthers && len(ev) > 1 {
			d.Text, d.Evidence = "it may leak already", ev
			return d, true
		}
	}
	return d, false
}

// perStroke gives what the areas of two ends, per cent of each end's own throughput, are to be taken times before they
// are held against each other: wall heat goes with what an end sweeps, and an end with its pocket open delivers less of
// that.
func (x *examined) perStroke(own string, o *examined, part string) (mine, others float64) {
	a, b := x.at(own, "ve_suction_percent"), o.at(part, "ve_suction_percent")
	if !(a > 0 && b > 0) {
		return 1, 1
	}
	return a / max(a, b), b / max(a, b)
}

// alone holds the groups of an end that has no like against each other. The rings of a single-acting cylinder leak as
// its suction group does, and more is allowed there; wall heat makes the late compression exponent the lesser one.
func (x *examined) alone(d Doubt, end, g int) (Doubt, bool) {
	part := "." + endNames[end]
	area, other := x.at(part+"."+groupNames[g], "leak_percent"), x.at(part+"."+groupNames[1-g], "leak_percent")
	n := x.at(part, "n_comp_late") - x.at(part, "n_exp_late")
	if more := area - other; !(more > aloneMore[g]) || !(signs[g]*n > aloneExponent[g]) {
		return d, false
	}
	d.Text = "it may leak already"
	if g == 0 {
		d.Text = "it or the rings may leak already"
	}
	d.Evidence = []string{fmt.Sprintf("leak area reads %.1f %% of throughput, the end's %s group %.1f %%", area, groupNames[1-g], other),
		fmt.Sprintf("late exponents, compression less expansion, %+.3f", n)}
	return d, true
}

// like is another end whose healthy readings should be much the same.
type like struct {
	x   *examined
	end int
}

// works tells whether an end compressed at this load step.
func (x *examined) works(end int) bool { return !math.IsNaN(x.at("."+endNames[end], "n_comp_late")) }

// likes gives the cylinder's other end, then the same end of the throws that have the same pressures and the same size,
// told by their suction pressure, ratio and indicated work, and whose other end works or rests likewise: beside an end
// that rests the rings leak as the loaded end's suction group does.
func (x *examined) likes(b *Baseline, end int) []like {
	var out []like
	pair := x.works(1 - end)
	if pair {
		out = append(out, like{x, 1 - end})
	}
	for i := range b.Cells {
		c := &b.Cells[i]
		if c.Throw == x.c.Throw || c.Step != x.c.Step || c.Inferred {
			continue
		}
		o := examined{c: c, layout: x.layout}
		near := func(a, b, share float64) bool { return math.Abs(a-b) <= share*math.Abs(a) }
		if o.works(1-end) == pair && near(x.c.Shape.Centre[2], c.Shape.Centre[2], 0.002) && math.Abs(x.c.Shape.Centre[0]-c.Shape.Centre[0]) < 0.02 &&
			near(x.at("."+endNames[end], "indicated_work_j"), o.at("."+endNames[end], "indicated_work_j"), 0.1) {
			out = append(out, like{&o, end})
		}
	}
	return out
}

// end holds one end against absolute limits.
func (x *examined) end(e int, k, ps float64) (out []Doubt) {
	part := "." + endNames[e]
	subject := x.throwID() + part
	add := func(text, format string, a ...any) {
		out = append(out, Doubt{Subject: subject, Step: x.c.Step, Text: text, Evidence: []string{fmt.Sprintf(format, a...)}})
	}
	nc, ne := x.at(part, "n_comp_late"), x.at(part, "n_exp_late")
	if math.Abs(nc-k) > mostExponent || math.Abs(ne-k) > mostExponent {
		text := "a leak, or dead centre, clearance or pressure zero wrong"
		if (nc-k)*(ne-k) < 0 {
			text = "a leak: the exponents are off in opposite directions"
		}
		add(text, "late exponents %.3f and %.3f, the gas has %.3f", nc, ne, k)
	}
	if fb := x.at(part, "flow_balance"); math.Abs(fb-1) > mostBalance {
		add("suction and discharge do not pass the same flow", "flow balance %.3f", fb)
	}
	if t := x.at(part, "t_excess_k"); t > mostHot {
		add("the discharge runs hot", "%.0f K above the adiabatic temperature", t)
	}
	if z := x.at(part, "leak_zero_bar"); math.Abs(z)*1e5 > mostZero*ps {
		add("the pressure transducer's zero is off", "%+.2f bar by the leak fit", z)
	}
	return out
}

func (x *examined) rings() (Doubt, bool) {
	a := x.at(".rings", "leak_percent")
	if !(a > mostRings) {
		return Doubt{}, false
	}
	return Doubt{Subject: x.throwID() + ".rings", Step: x.c.Step, Text: "they may leak already",
		Evidence: []string{fmt.Sprintf("leak area reads %.1f %% of throughput, and the ring area needs no reference", a)}}, true
}
