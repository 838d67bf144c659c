package skid

import (
	"fmt"
	"math"
	"strings"
	"time"

	"lapwing/internal/crank"
)

// What a limit made from a rating has besides its bound.
const (
	ratedBand     = 0.02 // deadband, share of the rating
	ratedOnDelay  = 10 * time.Second
	ratedOffDelay = 30 * time.Second
	ratedSeverity = "alert"
	nearRating    = 0.9 // share of a rating from which the check doubts: valve losses add some per cent to the ideal cycle
)

// rating is one rated load with the measure that it bounds.
type rating struct {
	key, measure string
	value        float64 // N, 0 unknown
	tension      bool    // the measure counts it negative
	combined     bool    // with the inertia of the masses
}

func (m Machine) ratings() []rating {
	return []rating{
		{"rod_load_compression_kn", "rod_load_max_kn", m.RodLoadCompression, false, true},
		{"rod_load_tension_kn", "rod_load_min_kn", m.RodLoadTension, true, true},
		{"gas_load_compression_kn", "gas_load_max_kn", m.GasLoadCompression, false, false},
		{"gas_load_tension_kn", "gas_load_min_kn", m.GasLoadTension, true, false},
	}
}

// ratedLimits makes a limit of every rated load for every throw whose load can be measured, where the file states none
// of its own: an alert at the rating. The combined load needs the reciprocating masses.
func (sk *Skid) ratedLimits() {
	for i := range sk.Throws {
		t := &sk.Throws[i]
		for _, r := range sk.Machine.ratings() {
			if r.value == 0 || r.combined && !t.weighed() || !t.measured() || sk.limited(t.ID, r.measure) {
				continue
			}
			l := Limit{Subject: t.ID, Measure: r.measure, High: r.value / 1e3, Low: math.NaN(), Deadband: ratedBand * r.value / 1e3,
				OnDelay: ratedOnDelay, OffDelay: ratedOffDelay, Severity: ratedSeverity, From: "machine." + r.key}
			if r.tension {
				l.High, l.Low = math.NaN(), -r.value/1e3
			}
			sk.Limits = append(sk.Limits, l)
		}
	}
}

// weighed reports whether the masses that make the inertia are known.
func (t *Throw) weighed() bool { return t.Cylinder.MassPiston > 0 && t.Cylinder.MassCrosshead > 0 }

// measured reports whether every working end has a pressure.
func (t *Throw) measured() bool {
	for _, e := range t.Ends {
		if e.Works && e.Pressure == "" {
			return false
		}
	}
	return true
}

func (sk *Skid) limited(subject, measure string) bool {
	for _, l := range sk.Limits {
		if l.Subject == subject && l.Measure == measure {
			return true
		}
	}
	return false
}

// manner says in what else a limit differs from a plain one.
func manner(l Limit) (out string) {
	if l.OnTurns > 0 || l.OffTurns > 0 {
		out += fmt.Sprintf("; at least %d turns to come, %d to go", l.OnTurns, l.OffTurns)
	}
	if l.Latch {
		out += "; stays until it is acknowledged and reset"
	}
	if len(l.Unless) > 0 {
		out += "; suppressed while " + list(l.Unless)
	}
	return out
}

func from(l Limit) string {
	if l.From == "" {
		return ""
	}
	return " (from " + l.From + ")"
}

// shares are the peaks of a throw's pin load, and where it is rated gas load, as per cent of their ratings.
func (m Machine) shares(it idealThrow) string {
	pair := func(r crank.Reversal, push, pull float64) string {
		one := func(v, rated float64) string {
			if rated == 0 {
				return "–"
			}
			return f("%.0f", 100*v/rated)
		}
		if push == 0 && pull == 0 {
			return ""
		}
		return one(r.MaxCompression, push) + "/" + one(r.MaxTension, pull) + " %"
	}
	out := pair(it.pin, m.RodLoadCompression, m.RodLoadTension)
	if g := pair(it.gas, m.GasLoadCompression, m.GasLoadTension); g != "" {
		out = strings.TrimPrefix(out+", gas "+g, ", ")
	}
	if out == "" {
		return "–"
	}
	return out
}

// rated doubts loads over and close to their ratings.
func (d *doubter) rated(path, id string, s Step, it idealThrow) {
	for _, r := range d.sk.Machine.ratings() {
		if r.value == 0 {
			continue
		}
		load, what := it.gas, "gas load"
		if r.combined {
			load, what = it.pin, "pin load"
		}
		v, way := load.MaxCompression, "compression"
		if r.tension {
			v, way = load.MaxTension, "tension"
		}
		switch {
		case v > r.value:
			d.add(path, "The running gear is then loaded beyond its rating even without valve losses. Check bore, pressures and the rating before anything else.",
				"%s of %s in step %d is %.0f kN in %s, rated %.0f kN", what, id, s.Code, v/1e3, way, r.value/1e3)
		case v > nearRating*r.value:
			d.add(path, "Valve losses and pulsation add some per cent to the ideal cycle, so the rating may be passed in service. Compare with the maker's rod load table for this step.",
				"%s of %s in step %d takes %.0f %% of the rated %s", what, id, s.Code, 100*v/r.value, way)
		}
	}
}

// limits doubts limits that lie beyond a rating.
func (d *doubter) limits() {
	for i, l := range d.sk.Limits {
		for _, r := range d.sk.Machine.ratings() {
			if l.From != "" || r.value == 0 || l.Measure != r.measure {
				continue
			}
			kn := r.value / 1e3
			if v, key := l.High, "high"; !r.tension && v > kn || r.tension && l.Low < -kn {
				if r.tension {
					v, key = l.Low, "low"
				}
				d.add(fmt.Sprintf("limits[%d].%s", i, key), "Between rating and limit the machine is overloaded and nobody hears of it. Write the rating, or leave the limit out: it is then made from the rating.",
					"the limit on %s of %s is %s kN, the rating %s kN", l.Measure, l.Subject, short(v), short(kn))
			}
		}
	}
}

// worst writes the largest share of each rating over all throws and load steps.
func (p *page) worst(sk *Skid, ds []duty) {
	var words []string
	for _, r := range sk.Machine.ratings() {
		if r.value == 0 {
			continue
		}
		most, where := 0.0, ""
		for i := range sk.Throws {
			d := ds[sk.Throws[i].Stage-1]
			if d.err != nil {
				continue
			}
			for _, s := range sk.Steps {
				it := sk.ideal(i, s, d.line, d.gas)
				load := it.gas
				if r.combined {
					load = it.pin
				}
				v := load.MaxCompression
				if r.tension {
					v = load.MaxTension
				}
				if v/r.value > most {
					most, where = v/r.value, f("%s, step %d", sk.Throws[i].ID, s.Code)
				}
			}
		}
		if where != "" {
			words = append(words, f("%.0f %% of %s (%s)", 100*most, r.key, where))
		}
	}
	if len(words) > 0 {
		fmt.Fprintln(p.w)
		p.wrapped("At most, before valve losses: "+strings.Join(words, ", ")+".", "  ", 110)
	}
}

// failed writes what the rod loads become when one valve of an end stands open all turn: API 618 wants the combined
// load checked for a failed valve in any place (6.6; from memory). First load step only.
func (p *page) failed(sk *Skid, ds []duty) {
	s := sk.Steps[0]
	rows := []string{row("failed open", "gas load", "pin load", "of rated", "pin reversal")}
	span := func(r crank.Reversal) string { return f("+%.1f/−%.1f kN", r.MaxCompression/1e3, r.MaxTension/1e3) }
	for i := range sk.Throws {
		d := ds[sk.Throws[i].Stage-1]
		if d.err != nil {
			continue
		}
		for e, end := range sk.Throws[i].Ends {
			if !end.Works || s.Idle[sk.EndName(i, e)] {
				continue
			}
			for k, held := range [2]float64{d.line.Ps, d.line.Pd} {
				it := sk.idealHeld(i, s, d.line, d.gas, e, held)
				rows = append(rows, row(sk.EndName(i, e)+"."+[2]string{"suction", "discharge"}[k], span(it.gas), span(it.pin), sk.Machine.shares(it),
					f("%.0f°, %.0f %%", it.pin.Longest, 100*it.pin.Share)))
			}
		}
	}
	if len(rows) == 1 {
		return
	}
	p.title("Rod loads in step %d with one valve failed open", s.Code)
	fmt.Fprintln(p.w, "  The end then stands at the pressure of that line all turn.")
	p.table(rows)
}
