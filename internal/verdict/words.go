package verdict

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// write makes the finding that people read, from the evidence of this block and the medians of the last ones.
func (j *Judge) write(b *bench, c *trial, blk duty.Block, press *[hPressures]fitted) Finding {
	w := c.weigh()
	m := &c.marks[len(c.marks)-1]
	f := Finding{Subject: c.subject, Kind: c.kind, Grade: c.grade, Odds: w.total, SinceTurn: c.since, Turn: blk.Turn1,
		Seq0: blk.Seq0, Seq1: blk.Seq1, Throw: blk.Throw, Valve: m.valve, Ambiguous: slices.Clone(m.ambiguous)}
	j.severity(&f, b, c, blk.Point.RPM)
	if c.grade > None {
		f.Trend = c.follow(j.cfg.Start+blk.Time, f.Severity)
	}
	f.Evidence = j.evidence(b, c, press)
	f.Settle, f.Next = advice(c, &f)
	f.Sentence = sentence(j.layout, b, c, &f)
	return f
}

// circle is the deviations of one class that bear on a hypothesis: sign +1 where more speaks for it, nil where either does.
type circle struct {
	class measure.Class
	idx   []int
	sign  []float64
	most  int // how many are worth telling
}

// evidence lists what speaks for the finding in the present block, strongest first: the class's weight is shared out
// by each feature's part in the chi-square.
func (j *Judge) evidence(b *bench, c *trial, press *[hPressures]fitted) []Evidence {
	m := &c.marks[len(c.marks)-1]
	var out []Evidence
	for _, s := range j.circles(b, c, press) {
		var es []Evidence
		for _, w := range j.weighed(b, c, s, m.vote[s.class].llr) {
			if w.Weight > 0 {
				es = append(es, Evidence{Class: w.Class, Text: w.Text, Feature: w.Feature, Value: w.Value, Expected: w.Expected, Z: w.Z, LLR: w.Weight})
			}
		}
		slices.SortStableFunc(es, func(x, y Evidence) int { return cmp.Compare(y.LLR, x.LLR) })
		out = append(out, es[:min(s.most, len(es))]...)
	}
	slices.SortStableFunc(out, func(x, y Evidence) int { return cmp.Compare(y.LLR, x.LLR) })
	return out
}

// text puts a deviation into words as it bears on a hypothesis.
func (j *Judge) text(b *bench, c *trial, i int, d *duty.Deviation) string {
	if n := j.layout[i].Name; c.kind == Leaking && (n == "leak_area_mm2" || n == "leak_percent") {
		return j.sayLeak(b.path(c.h), b.common(c.h, j.dev), j.layout[i].Subject)
	}
	return say(j.layout[i], d)
}

// circles gathers what bears on a hypothesis.
func (j *Judge) circles(b *bench, c *trial, press *[hPressures]fitted) (out []circle) {
	var idx []int
	var sign []float64
	if c.kind == OpeningLate {
		ep := &b.place.ends[c.end]
		idx, sign = []int{ep.loss[c.group], ep.open[c.group]}, []float64{1, 1}
	} else if c.h >= 0 {
		s := look(&b.place, j.layout, j.dev, true)
		amp := 1.0
		if press[c.h].g < 0 {
			amp = -1
		}
		for e := range s.pattern[c.h] {
			for i, t := range s.pattern[c.h][e] {
				if t != 0 {
					idx, sign = append(idx, b.place.ends[e].f[i]), append(sign, t*amp)
				}
			}
		}
		if c.kind == Leaking && !c.packing() {
			i := b.path(c.h).percent
			if at(j.dev, i) == nil {
				i = b.path(c.h).area
			}
			idx, sign = append(idx, i), append(sign, 1)
		}
	}
	out = append(out, circle{measure.Pressure, idx, sign, 5})
	vibration := func(most int, idx ...int) {
		sign := make([]float64, len(idx))
		for k := range sign {
			sign[k] = 1
		}
		out = append(out, circle{measure.Vibration, idx, sign, most})
	}
	switch {
	case c.kind == Leaking && !c.packing():
		noise := b.path(c.h).noise
		if c.h < hRings { // the partner, which acts at the same angles, may be the louder one
			if d, q := at(j.dev, noise), at(j.dev, b.path(partner(c.h)).noise); q != nil && (d == nil || d.Z < 0.7*q.Z) {
				noise = b.path(partner(c.h)).noise
			}
		}
		vibration(1, noise)
	case c.kind == ImpactingHard:
		ep := &b.place.ends[c.end]
		open := ep.impact[c.group][0]
		if at(j.dev, open) == nil {
			open = ep.plain[c.group]
		}
		if at(j.dev, open) == nil {
			open = ep.peak[c.group]
		}
		vibration(2, open, ep.impact[c.group][1], ep.hits[c.group])
	case c.kind == Fluttering:
		ep := &b.place.ends[c.end]
		vibration(3, ep.hits[c.group], ep.onset[c.group], ep.lag[c.group])
	case c.kind == OpeningLate:
		ep := b.place.ends[c.end]
		vibration(3, ep.onset[c.group], ep.lag[c.group], ep.impact[c.group][0])
	case c.kind == AccelGain:
		idx = nil
		for e := range b.place.ends {
			for g := range groupName {
				idx = append(idx, b.place.ends[e].impact[g][0])
			}
		}
		out = append(out, circle{measure.Vibration, idx, nil, 4})
	}
	if c.group >= 0 {
		idx = nil
		for _, cv := range b.place.ends[c.end].covers[c.group] {
			idx = append(idx, cv.at)
		}
		if len(idx) == 0 {
			idx = []int{b.place.ends[c.end].excess}
		}
		out = append(out, circle{measure.Temperature, idx, nil, 1})
	} else if c.h == hRings {
		out = append(out, circle{measure.Temperature, []int{b.place.ends[0].excess, b.place.ends[1].excess}, []float64{1, 1}, 1})
	}
	return out
}

func (b *bench) path(h int) pathPlace {
	if h == hRings {
		return b.place.rings
	}
	return b.place.ends[h/2].path[h%2]
}

// say puts one deviation into plain words, with its number in the unit that people read.
func say(f measure.Feature, d *duty.Deviation) string {
	sc := f.Scale
	if sc == 0 {
		sc = 1
	}
	r := d.Residual * sc
	more := func(a, b string) string {
		if r > 0 {
			return a
		}
		return b
	}
	end := ""
	if f.End == 0 || f.End == 1 {
		end = " (" + endWords[f.End] + ")"
	}
	switch f.Name {
	case "discharge_opens_late_deg", "discharge_opens_deg":
		return fmt.Sprintf("discharge opens %.1f° %s than expected at this duty%s", math.Abs(r), more("later", "earlier"), end)
	case "suction_opens_late_deg", "suction_opens_deg":
		return fmt.Sprintf("suction opens %.1f° %s than expected at this duty%s", math.Abs(r), more("later", "earlier"), end)
	case "n_comp_early", "n_comp_late", "n_exp_early", "n_exp_late":
		when := map[string]string{"n_comp_early": "early compression", "n_comp_late": "late compression",
			"n_exp_early": "early expansion", "n_exp_late": "late expansion"}[f.Name]
		return fmt.Sprintf("exponent of %s %.3f, %.3f %s than expected%s", when, d.Value, math.Abs(r), more("higher", "lower"), end)
	case "ve_suction_percent", "ve_discharge_percent":
		by := strings.TrimSuffix(strings.TrimPrefix(f.Name, "ve_"), "_percent")
		return fmt.Sprintf("volumetric efficiency by %s %.1f points %s than expected%s", by, math.Abs(r), more("higher", "lower"), end)
	case "mass_comp_percent":
		return fmt.Sprintf("gas seems to %s %.2f %% while compressing%s", more("gain", "lose"), math.Abs(r), end)
	case "mass_exp_percent":
		return fmt.Sprintf("gas seems to %s %.2f %% while expanding%s", more("gain", "lose"), math.Abs(r), end)
	case "leak_noise_db":
		if strings.HasSuffix(f.Subject, ".rings") {
			return fmt.Sprintf("noise at the angles where rings leak %+.1f dB", r)
		}
		return fmt.Sprintf("noise while %s is closed %+.1f dB", f.Subject, r)
	case "impact_ln":
		return fmt.Sprintf("impact at %s %.2g times the usual", f.Subject, math.Exp(d.Residual))
	case "impact_norm_ln":
		return fmt.Sprintf("impact at %s %.2g times the usual", f.Subject, math.Exp(d.Residual))
	case "peak_g":
		return fmt.Sprintf("peak at %s %.2g times the usual, in a window that two openings share", f.Subject, d.Value/d.Expected)
	case "extra_hits_45":
		return fmt.Sprintf("%.0f extra hits in 45 turns after %s, usually %.0f", d.Value, f.Subject, math.Max(0, d.Expected))
	case "lag_ms":
		return fmt.Sprintf("impact at %s %.2f ms %s after its pressure event than usual", f.Subject, math.Abs(r), more("later", "sooner"))
	case "onset_deg":
		return fmt.Sprintf("impact at %s %.1f° %s than expected", f.Subject, math.Abs(r), more("later", "sooner"))
	case "suction_loss_kw", "discharge_loss_kw":
		return fmt.Sprintf("%s valve loss %.2f kW %s than expected%s", strings.TrimSuffix(f.Name, "_loss_kw"), math.Abs(r), more("more", "less"), end)
	case "cover_above_group_k":
		return fmt.Sprintf("cover of %s is %.0f K %s its group", f.Subject, math.Abs(d.Value), above(d.Value))
	case "t_excess_k":
		return fmt.Sprintf("discharge gas %.0f K %s than expected", math.Abs(r), more("warmer", "cooler"))
	}
	return fmt.Sprintf("%s %s is %.4g, expected %.4g", f.Subject, f.Name, d.Value*sc+f.Shift, d.Expected*sc+f.Shift)
}

func above(v float64) string {
	if v < 0 {
		return "below"
	}
	return "above"
}
