package verdict

import (
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
)

// severity puts numbers with honest intervals on a finding. The patterns' own uncertainty (35 %) and that of the fitted
// area (reference/leaks.md section 4) are in them; formal intervals are far too narrow.
func (j *Judge) severity(f *Finding, b *bench, c *trial, rpm float64) {
	g, sd := c.amplitude()
	add := func(name string, v, half float64) {
		if !math.IsNaN(v) && !math.IsNaN(half) {
			f.Severity = append(f.Severity, Quantity{name, v, v - half, v + half})
		}
	}
	whole := func(share float64) float64 { return 2 * math.Hypot(sd, share*g) }
	switch c.kind {
	case Leaking:
		j.leakSeverity(f, b, c)
	case ImpactingHard:
		if ln, sd, ok := j.blow(&b.place.ends[c.end], c.group); ok {
			f.Severity = append(f.Severity, Quantity{"impact_ratio", math.Exp(ln), math.Exp(ln - 2*sd), math.Exp(ln + 2*sd)})
		}
	case OpeningLate:
		ep := &b.place.ends[c.end]
		late, sd := lateness(ep, c.group, j.dev, rpm)
		add("late_ms", 1e3*late, 2e3*sd)
		if d := at(j.dev, ep.loss[c.group]); d != nil {
			add("extra_valve_loss_kw", d.Residual*scale(j.layout, ep.loss[c.group]), 2*d.Spread*scale(j.layout, ep.loss[c.group]))
		}
	case Fluttering:
		if d := at(j.dev, b.place.ends[c.end].hits[c.group]); d != nil {
			add("extra_hits_45", d.Value, 2*math.Sqrt(math.Max(1, d.Value)))
		}
	case DeadCentre: // amplitude: degrees that the pressures are plotted too early
		add("early_deg", g, whole(0.2))
	case PressureZero:
		add("zero_percent_of_suction", g, whole(0.2))
	case Clearance: // the pattern is that of a clearance assumed too high
		add("clearance_points_lower", g, whole(0.3))
	case GasChanged:
		add("exponent_change", g/100, whole(0.2)/100)
	case AccelGain: // healthy blocks move by up to 0.20 in ln (reference/vibration.md section 5)
		if !math.IsNaN(g) {
			f.Severity = append(f.Severity, Quantity{"gain_ratio", math.Exp(g), math.Exp(g - 0.2), math.Exp(g + 0.2)})
		}
	}
}

// leakSeverity: mm², share of the path's throughput, kW that are spent on gas that goes round, K.
func (j *Judge) leakSeverity(f *Finding, b *bench, c *trial) {
	g, sd := c.amplitude()
	positive := func(name string, v, half float64) {
		f.Severity = append(f.Severity, Quantity{name, v, math.Max(0, v-half), v + half})
	}
	if !math.IsNaN(g) && g > 0 {
		positive("lost_capacity_percent", g, 2*math.Hypot(sd, templateError/2*g))
	}
	if a, s := c.newest(func(m *mark) (float64, float64) { return m.area, m.aSd }); !math.IsNaN(a) {
		positive("leak_area_mm2", 1e6*a, 2e6*s)
	}
	l, s := c.newest(func(m *mark) (float64, float64) { return m.loss, m.lSd })
	if !math.IsNaN(l) {
		positive("leak_percent", 100*l, 200*s)
	}
	// A share of the gas that is compressed once more takes about that share of the work once more.
	if p := j.power(b, c); !math.IsNaN(l) && !math.IsNaN(p) {
		positive("lost_power_kw", l*p, 2*p*math.Hypot(s, 0.25*l))
	}
	for e := range b.place.ends { // the ends of a throw share their discharge pipe
		if i := b.place.ends[e].excess; c.end == e || c.end < 0 && e == crank.HE {
			if d := at(j.dev, i); d != nil && !c.packing() {
				k := d.Residual * scale(j.layout, i)
				f.Severity = append(f.Severity, Quantity{"discharge_excess_k", k, k - 2*d.Spread, k + 2*d.Spread})
			}
		}
	}
}

// power is the indicated power of what a leak belongs to, kW: its end's, for rings both ends'. NaN: not known.
func (j *Judge) power(b *bench, c *trial) float64 {
	sum := 0.0
	for e := range b.place.ends {
		if c.end != e && c.end >= 0 {
			continue
		}
		i := b.place.ends[e].power
		d := at(j.dev, i)
		if d == nil {
			return math.NaN()
		}
		sum += d.Value * scale(j.layout, i)
	}
	return sum
}

// blow is how much harder than usual an opening is, ln with its standard deviation.
func (j *Judge) blow(ep *endPlace, g int) (ln, sd float64, ok bool) {
	if d := ep.struck(g, j.dev); d != nil {
		return d.Residual, d.Spread, true
	}
	if d := at(j.dev, ep.peak[g]); d != nil && d.Expected > 0 && d.Value > 0 {
		return math.Log(d.Value / d.Expected), d.Spread / d.Expected, true
	}
	return 0, 0, false
}

// lateness is how late an opening's impact is after its pressure event, s with its standard deviation: by the witness
// that sticking goes by. NaN: not known.
func lateness(ep *endPlace, g int, dev []*duty.Deviation, rpm float64) (late, sd float64) {
	late, sd = math.NaN(), math.NaN()
	z := math.Inf(-1)
	if d := at(dev, ep.lag[g]); d != nil {
		z, late, sd = d.Z, d.Residual, d.Spread
	}
	a, c := at(dev, ep.onset[g]), at(dev, ep.late[g])
	if x := beyondCrossing(dev, ep.onset[g], ep.late[g]); !math.IsNaN(x) && x > z {
		late, sd = (a.Residual-c.Residual)/(6*rpm), math.Hypot(a.Spread, c.Spread)/(6*rpm)
	}
	return late, sd
}
