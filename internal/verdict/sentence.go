package verdict

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"lapwing/internal/measure"
)

// What the words of a sentence are, by kind: what is wrong, and what people do next on an alert or a finding about a sensor.
var spoken = map[string]struct{ what, note, next string }{
	Leaking:       {"leaking", "", "plan to inspect this group at the next suitable stop"},
	ImpactingHard: {"impacting hard", "plate or spring broken, or a worn seat", "plan to inspect this group at the next suitable stop"},
	OpeningLate:   {"opening late", "sticking", "check oil feed and liquid carry-over; inspect this group for deposits at the next suitable stop"},
	Fluttering:    {"fluttering", "", "compare gas and flow with what its springs were chosen for"},
	DeadCentre:    {"angle reference has moved", "", "check the shaft mark; until then this throw's pressures accuse no valve"},
	PressureZero:  {"pressure zero has moved", "", "check the transmitter and its passage; until then it accuses no valve"},
	Clearance:     {"clearance is not what it was", "", "check the pocket's position, then for liquid or deposits; until then this end's pressures accuse no valve"},
	GasChanged:    {"gas differs from the baseline's", "", "compare the gas analysis; until then the pressures accuse no valve"},
	AccelGain:     {"accelerometer sensitivity has changed", "", "check mounting, cable and sensitivity; until then it accuses no valve"},
}

var gradeWords = [...]string{None: "ended", Advisory: "possible", Alert: "confirmed", Danger: "confirmed and severe"}

// known ranks pressure evidence by how well an operator knows it: openings, then flow and work, then exponents.
func known(l measure.Layout, e Evidence) int {
	if e.Feature < 0 || math.Abs(e.Z) < 2 {
		return 0
	}
	switch n := l[e.Feature].Name; {
	case strings.HasSuffix(n, "_opens_late_deg") || strings.HasSuffix(n, "_loss_kw"):
		return 3
	case strings.HasPrefix(n, "ve_") || strings.HasPrefix(n, "mass_"):
		return 2
	}
	return 1
}

// sentence is the one line for the operator: which part, what is wrong with it, how sure, why, how much, where it is
// going, and what comes next.
func sentence(l measure.Layout, b *bench, c *trial, f *Finding) string {
	var s strings.Builder
	s.WriteString(f.Subject + " " + spoken[c.kind].what)
	if aside := slices.DeleteFunc([]string{b.where(c), spoken[c.kind].note}, func(a string) bool { return a == "" }); len(aside) > 0 {
		s.WriteString(" (" + strings.Join(aside, "; ") + ")")
	}
	if f.Grade == None {
		return s.String() + ": " + gradeWords[None]
	}
	s.WriteString(", " + gradeWords[f.Grade])
	if by := c.by(); by != "" {
		s.WriteString(by)
	}
	sep := ": "
	for _, e := range tell(l, f) {
		s.WriteString(sep + c.short(e))
		sep = ", "
	}
	if len(f.Evidence) == 0 { // it stands until enough blocks have been without it
		s.WriteString(": nothing of it in the newest block of turns")
	}
	if size := size(c, f); size != "" {
		s.WriteString("; " + size)
	}
	if way := f.Trend.words(); way != "" {
		s.WriteString("; " + way)
	}
	if f.Valve != "" {
		s.WriteString("; most likely " + f.Valve)
		for _, e := range f.Evidence {
			if e.Class == measure.Temperature {
				s.WriteString(": " + e.Text)
			}
		}
	}
	if len(f.Ambiguous) > 0 {
		s.WriteString("; cannot be told from " + strings.Join(f.Ambiguous, " or "))
		if m := &c.marks[len(c.marks)-1]; m.rather != "" {
			s.WriteString(", and covers that stay cold speak for " + m.rather)
		}
	}
	return s.String() + ". Next: " + nextWords(c, f) + "."
}

// where says in words which valves a subject is.
func (b *bench) where(c *trial) string {
	switch {
	case c.sensor && c.end >= 0:
		return "the pressure of the " + endWords[c.end] + " of " + b.place.id
	case c.group >= 0:
		return groupName[c.group] + " valves, " + endWords[c.end] + " of " + b.place.id
	}
	return ""
}

// by says which kinds of signal speak for a finding.
func (c *trial) by() string {
	var for_ []string
	for k := range classes {
		if c.middle(k) >= alertClass {
			for_ = append(for_, measure.Class(k).String())
		}
	}
	switch n := len(for_); {
	case n == 0:
		return ""
	case n == 1 && c.grade == Advisory:
		return ", by " + for_[0] + " alone"
	case n == 1:
		return ", by " + for_[0]
	default:
		return " by " + strings.Join(for_[:n-1], ", ") + " and " + for_[n-1]
	}
}

// tell picks the witnesses that a sentence names: of pressures the one that people know best, of the others the strongest.
func tell(l measure.Layout, f *Finding) (out []string) {
	said := slices.Clone(f.Evidence)
	slices.SortStableFunc(said, func(x, y Evidence) int {
		if x.Class != y.Class || x.Class != measure.Pressure {
			return 0
		}
		return cmp.Compare(known(l, y), known(l, x))
	})
	sized := slices.ContainsFunc(f.Severity, func(q Quantity) bool { return q.Name == "leak_area_mm2" })
	n := map[measure.Class]int{}
	for _, e := range said {
		most := 2
		if sized && e.Class == measure.Pressure {
			if most = 1; e.Feature >= 0 && strings.HasPrefix(l[e.Feature].Name, "leak_") {
				continue // said with the size
			}
		}
		if n[e.Class] >= most || e.Class == measure.Temperature && f.Valve != "" {
			continue
		}
		n[e.Class]++
		out = append(out, e.Text)
	}
	return out
}

// short leaves out of a witness's words what the sentence has said already: which part, and which end.
func (c *trial) short(text string) string {
	text = strings.ReplaceAll(text, "while "+c.subject+" is closed", "while closed")
	text = strings.ReplaceAll(text, c.subject+".opens", "opening")
	text = strings.ReplaceAll(text, c.subject+".closes", "closing")
	if c.end >= 0 {
		text = strings.ReplaceAll(text, " ("+endWords[c.end]+")", "")
	}
	return strings.ReplaceAll(text, " at this duty", "")
}

// amiss says how far off a sensor or the geometry is.
var amiss = map[string]string{
	"early_deg":               "pressures come about %.2g° early (%.2g to %.2g; minus is late)",
	"zero_percent_of_suction": "about %.2g %% of suction pressure off (%.2g to %.2g)",
	"clearance_points_lower":  "clearance about %.2g points lower (%.2g to %.2g; minus is higher)",
	"exponent_change":         "exponent about %+.3f (%+.3f to %+.3f)",
	"gain_ratio":              "reads about %.2g times as much (%.2g to %.2g)",
}

// size is how large a finding is, in words.
func size(c *trial, f *Finding) string {
	if s := strings.TrimPrefix(sizedWords(f.Severity), "; "); s != "" {
		for _, q := range f.Severity {
			if q.Name == "lost_power_kw" && q.Value >= 0.1 {
				s += fmt.Sprintf(", about %.2g kW", q.Value)
			}
		}
		return s
	}
	for _, q := range f.Severity {
		if say, ok := amiss[q.Name]; ok {
			return fmt.Sprintf(say, q.Value, q.Lo, q.Hi)
		}
		if q.Name == "lost_capacity_percent" {
			return fmt.Sprintf("about %.1f %% of this end's delivery lost (%.1f to %.1f)", q.Value, q.Lo, q.Hi)
		}
	}
	return ""
}

// units of the quantities that trends are of, for a sentence.
var units = map[string]string{"leak_area_mm2": " mm²", "lost_capacity_percent": " %", "impact_ratio": " times the usual", "late_ms": " ms", "extra_hits_45": " hits"}

// words says a trend that is one: from what to what, and in what time.
func (t Trend) words() string {
	if t.Way != Rising && t.Way != Falling {
		return ""
	}
	span := fmt.Sprintf("%.2g h", t.Hours)
	switch {
	case t.Hours < 0.03:
		span = fmt.Sprintf("%.0f s", 3600*t.Hours)
	case t.Hours < 2:
		span = fmt.Sprintf("%.0f min", 60*t.Hours)
	case t.Hours >= 48:
		span = fmt.Sprintf("%.0f days", t.Hours/24)
	}
	return fmt.Sprintf("%s, %.2g to %.2g%s in %s", t.Way, t.From, t.To, units[t.Quantity], span)
}

// nextWords is what comes next, short enough for a sentence.
func nextWords(c *trial, f *Finding) string {
	switch {
	case c.sensor:
		return spoken[c.kind].next
	case c.packing():
		return "check the packing vent's flow or temperature"
	case f.Grade == Advisory:
		return "watch it; this alone is no reason to open the machine"
	case f.Grade == Danger:
		return "ask the machinery engineer now whether to unload or stop"
	case c.h == hRings && c.kind == Leaking:
		return "trend it over days; check lubrication, and rings and liner at the next suitable stop"
	}
	if slices.ContainsFunc(f.Ambiguous, func(a string) bool { return strings.HasSuffix(a, ".packing") }) {
		return "look at the packing vent first; " + spoken[c.kind].next
	}
	return spoken[c.kind].next
}
