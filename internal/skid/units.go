package skid

import (
	"fmt"
	"strconv"
	"strings"
)

// unit is one unit a key may end in: value·factor + offset is in the base unit of its dimension.
type unit struct {
	suffix         string // as a key ends, underscore included
	dim            string
	factor, offset float64
	name           string // as people write it
	slip           bool   // often written by mistake: offered when a number is out of bounds
}

// units in order of match: a suffix that ends in another one comes first.
var units = [...]unit{
	{"_bar_abs", "pressure", 1e5, 0, "bar absolute", true},
	{"_bar_gauge", "gauge", 1e5, 0, "bar gauge", true},
	{"_kpa_abs", "pressure", 1e3, 0, "kPa absolute", false},
	{"_kpa_gauge", "gauge", 1e3, 0, "kPa gauge", false},
	{"_psia", "pressure", 6894.757293, 0, "psi absolute", false},
	{"_psig", "gauge", 6894.757293, 0, "psi gauge", false},
	{"_bara", "pressure", 1e5, 0, "bar absolute", false},
	{"_barg", "gauge", 1e5, 0, "bar gauge", false},
	{"_mbar", "pressure?", 1e2, 0, "mbar", false},
	{"_bar", "pressure?", 1e5, 0, "bar", false},
	{"_psi", "pressure?", 6894.757293, 0, "psi", false},
	{"_kpa", "pressure?", 1e3, 0, "kPa", true},
	{"_mpa", "pressure?", 1e6, 0, "MPa", true},
	{"_pa", "pressure?", 1, 0, "Pa", true},
	{"_mm2", "area", 1e-6, 0, "mm²", true},
	{"_cm2", "area", 1e-4, 0, "cm²", true},
	{"_m2", "area", 1, 0, "m²", true},
	{"_in2", "area", 6.4516e-4, 0, "in²", true},
	{"_cm3", "volume", 1e-6, 0, "cm³", true},
	{"_dm3", "volume", 1e-3, 0, "dm³", false},
	{"_in3", "volume", 1.6387064e-5, 0, "in³", true},
	{"_m3", "volume", 1, 0, "m³", true},
	{"_litres", "volume", 1e-3, 0, "litres", true},
	{"_l", "volume", 1e-3, 0, "litres", false},
	{"_n_per_mm", "stiffness", 1e3, 0, "N/mm", true},
	{"_kn_per_m", "stiffness", 1e3, 0, "kN/m", false},
	{"_n_per_m", "stiffness", 1, 0, "N/m", true},
	{"_lbf_per_in", "stiffness", 175.126835, 0, "lbf/in", true},
	{"_mm", "length", 1e-3, 0, "mm", true},
	{"_cm", "length", 1e-2, 0, "cm", true},
	{"_inches", "length", 0.0254, 0, "inches", false},
	{"_inch", "length", 0.0254, 0, "inches", false},
	{"_in", "length", 0.0254, 0, "inches", true},
	{"_um", "length", 1e-6, 0, "µm", true},
	{"_m", "length", 1, 0, "m", true},
	{"_degrees", "angle", 1, 0, "degrees", false},
	{"_deg", "angle", 1, 0, "degrees", true},
	{"_rad", "angle", 57.29577951308232, 0, "radians", false},
	{"_celsius", "temperature", 1, 273.15, "°C", false},
	{"_degc", "temperature", 1, 273.15, "°C", false},
	{"_c", "temperature", 1, 273.15, "°C", true},
	{"_k", "temperature", 1, 0, "kelvin", true},
	{"_degf", "temperature", 5.0 / 9, 459.67 * 5 / 9, "°F", false},
	{"_f", "temperature", 5.0 / 9, 459.67 * 5 / 9, "°F", true},
	{"_percent", "fraction", 0.01, 0, "%", true},
	{"_pct", "fraction", 0.01, 0, "%", false},
	{"_fraction", "fraction", 1, 0, "a fraction", true},
	{"_frac", "fraction", 1, 0, "a fraction", false},
	{"_rpm", "rate", 1.0 / 60, 0, "rpm", true},
	{"_khz", "rate", 1e3, 0, "kHz", true},
	{"_hz", "rate", 1, 0, "Hz", true},
	{"_lbf", "force", 4.4482216152605, 0, "lbf", false},
	{"_kgf", "force", 9.80665, 0, "kgf", false},
	{"_kn", "force", 1e3, 0, "kN", true},
	{"_n", "force", 1, 0, "N", true},
	{"_kgm2", "inertia", 1, 0, "kg m²", true},
	{"_kg", "mass", 1, 0, "kg", true},
	{"_lb", "mass", 0.45359237, 0, "lb", false},
	{"_g", "mass", 1e-3, 0, "g", true},
	{"_ms", "time", 1e-3, 0, "ms", true},
	{"_min", "time", 60, 0, "minutes", true},
	{"_h", "time", 3600, 0, "hours", true},
	{"_d", "time", 86400, 0, "days", true},
	{"_s", "time", 1, 0, "s", true},
	{"_mv", "voltage", 1e-3, 0, "mV", true},
	{"_v", "voltage", 1, 0, "V", true},
	{"_tb", "bytes", 1e12, 0, "TB", false},
	{"_gb", "bytes", 1e9, 0, "GB", true},
	{"_mb", "bytes", 1e6, 0, "MB", true},
}

// split takes the unit off a key. A key without one gives itself and the zero unit.
func split(key string) (stem string, u unit) {
	if per, ok := strings.CutPrefix(key, "mv_per_"); ok { // a sensitivity: its last word is no unit of its own
		return key, unit{name: "mV/" + per}
	}
	for _, u := range units {
		if stem, ok := strings.CutSuffix(key, u.suffix); ok && stem != "" {
			return stem, u
		}
	}
	return key, unit{}
}

// base gives a number of this unit in the base unit of its dimension; from is the way back.
func (u unit) base(v float64) float64 { return v*u.factor + u.offset }
func (u unit) from(b float64) float64 { return (b - u.offset) / u.factor }

// sameDim reports whether a number can be carried from one unit to the other without knowing more.
func sameDim(a, b unit) bool { return a.dim != "" && a.dim == b.dim }

// advise says what to write instead of an unknown key, given the keys that would be known there, and names the keys
// that were probably meant.
func advise(key, value string, known []string) (fix string, meant []string) {
	stem, u := split(key)
	var same []string
	for _, k := range known {
		if ks, _ := split(k); ks == stem {
			same = append(same, k)
		}
	}
	if len(same) > 0 {
		if len(same) == 2 && (u.dim == "" || u.dim == "pressure?") {
			return fmt.Sprintf("say whether the pressure is absolute or gauge: write %s or %s", same[0], same[1]), same
		}
		want := same[0]
		_, wu := split(want)
		for _, k := range same {
			if _, ku := split(k); sameDim(u, ku) {
				want, wu = k, ku
			}
		}
		if v, err := strconv.ParseFloat(value, 64); err == nil && sameDim(u, wu) {
			return fmt.Sprintf("write %s: %s (%s %s in %s)", want, short(wu.from(u.base(v))), clip(value), u.name, wu.name), same
		}
		return fmt.Sprintf("write %s, in %s", want, wu.name), same
	}
	if near := nearest(key, known); near != "" {
		return "did you mean " + near + "?", []string{near}
	}
	return "known here: " + strings.Join(known, ", "), nil
}

// short writes a number with the digits a person would.
func short(v float64) string { return strconv.FormatFloat(v, 'g', 6, 64) }

// nearest gives the known word closest to w, or "" when none is close: at most a third of its letters changed.
func nearest(w string, known []string) string {
	best, at := (len(w)+1)/3+1, ""
	if best > 5 {
		best = 5
	}
	for _, k := range known {
		if d := edits(w, k, best); d < best {
			best, at = d, k
		}
	}
	return at
}

// edits is the Levenshtein distance of two words, with words longer than 64 bytes and distances that must exceed
// limit cut short.
func edits(a, b string, limit int) int {
	if len(a) > 64 || len(b) > 64 || len(a)-len(b) >= limit || len(b)-len(a) >= limit {
		return limit
	}
	var row [65]int
	for j := range len(b) + 1 {
		row[j] = j
	}
	for i := 1; i <= len(a); i++ {
		diag := row[0]
		row[0] = i
		for j := 1; j <= len(b); j++ {
			d := diag
			if a[i-1] != b[j-1] {
				d++
			}
			diag = row[j]
			row[j] = min(d, row[j]+1, row[j-1]+1)
		}
	}
	return row[len(b)]
}
