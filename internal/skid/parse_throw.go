package skid

import (
	"fmt"
	"math"
	"strings"

	"lapwing/internal/crank"
)

// endKeys are the keys of the two ends of a throw in the file; endIDs their short names in valve and end names.
var (
	endKeys = [2]string{crank.HE: "head_end", crank.CE: "crank_end"}
	endIDs  = [2]string{crank.HE: "he", crank.CE: "ce"}
)

// list writes words one after the other.
func list(words []string) string { return strings.Join(words, ", ") }

func (r *reader) throws(o *object, sk *Skid) {
	const fix = "list the throws: - {id: t1, stage: 1, dead_centre_deg: …, bore_mm: …, …}"
	ids := map[string]int{}
	for i, n := range o.list("throws", 1, 12, true, fix) {
		path := fmt.Sprintf("throws[%d]", i)
		s := r.object(n, path, "id", "stage", "dead_centre_deg", "bore_mm", "stroke_mm", "rod_length_mm", "piston_rod_mm",
			"tail_rod_mm", "mass_piston_kg", "mass_crosshead_kg", "accelerometers", "head_end", "crank_end", "blind_end")
		if s == nil {
			continue
		}
		t := Throw{Stage: 1}
		var ok bool
		if t.ID, ok = s.text("id", throwID, "a short name that begins with a letter: t1", true); ok {
			if j, double := ids[t.ID]; double {
				s.wrong("id", "give each throw its own name", "throws[%d] is already called %s", j, t.ID)
			}
			ids[t.ID] = i
		}
		if v, ok := s.whole("stage", 1, 12, false); ok {
			t.Stage = v
		}
		t.DeadCentre = s.angle("dead_centre_deg")
		r.geometry(s, &t.Cylinder)
		for j, a := range s.list("accelerometers", 1, 8, false, "list channel ids: [a1]") {
			p := fmt.Sprintf("%s.accelerometers[%d]", path, j)
			if id, ok := r.word(a, p, inputID, "a channel id"); ok {
				r.at[p] = place(a)
				if !r.refer(sk, p, a, id, Acceleration) {
					id = "" // keeps the place in the list
				}
				t.Accel = append(t.Accel, id)
			}
		}
		for e := range t.Ends {
			r.end(s, sk, &t, e)
		}
		t.BlindAtSuction = s.choice("blind_end", "atmosphere", "atmosphere", "suction") == "suction"
		if s.has("blind_end") && s.has("head_end") && s.has("crank_end") {
			s.wrong("blind_end", "delete it", "both ends work, so there is no blind end")
		}
		if !s.has("head_end") && !s.has("crank_end") {
			r.problem(s.at, path, "write head_end: and, for a double-acting cylinder, crank_end:", "neither end works")
		}
		sk.Throws = append(sk.Throws, t)
	}
	r.stages(sk)
}

// angle reads the crank angle from the phase mark to a dead centre.
func (s *object) angle(key string) float64 {
	v := s.num(key, bounds{-360, 720}, true)
	if v < 0 || v >= 360 {
		turned := math.Mod(v+720, 360)
		s.wrong(key, fmt.Sprintf("write %s: %s", key, short(turned)), "%s is outside 0 to 360 degrees", short(v))
	}
	return v
}

// geometry reads a cylinder and refuses what cannot be built.
func (r *reader) geometry(s *object, c *crank.Cylinder) {
	mm := func(key string, lo, hi float64, needed bool) float64 { return s.num(key, bounds{lo, hi}, needed) / 1e3 }
	c.Bore = mm("bore_mm", 20, 1500, true)
	c.Stroke = mm("stroke_mm", 20, 800, true)
	c.ConRod = mm("rod_length_mm", 20, 3000, true)
	c.PistonRod = mm("piston_rod_mm", 5, 400, true)
	c.TailRod = zero(mm("tail_rod_mm", 5, 400, false))
	c.MassPiston = zero(s.num("mass_piston_kg", bounds{0.05, 20000}, false))
	c.MassCrosshead = zero(s.num("mass_crosshead_kg", bounds{0.05, 20000}, false))
	if c.PistonRod >= c.Bore {
		s.wrong("piston_rod_mm", "check both diameters", "the piston rod (%s mm) is not thinner than the bore (%s mm): its area leaves the crank end no piston", short(c.PistonRod*1e3), short(c.Bore*1e3))
	}
	if c.TailRod >= c.Bore {
		s.wrong("tail_rod_mm", "check both diameters", "the tail rod (%s mm) is not thinner than the bore (%s mm)", short(c.TailRod*1e3), short(c.Bore*1e3))
	}
	if c.ConRod <= c.Stroke/2 {
		s.wrong("rod_length_mm", "write the connecting rod's length between its bearing centres; 4 to 6 crank radii are usual", "the connecting rod (%s mm) is not longer than the crank radius (half the stroke, %s mm): the crank could not turn", short(c.ConRod*1e3), short(c.Stroke*500))
	}
}

// end reads one working side. An absent key makes the cylinder single-acting.
func (r *reader) end(s *object, sk *Skid, t *Throw, e int) {
	key := endKeys[e]
	o := s.sub(key, false, "clearance_percent", "pressure", "suction", "discharge")
	if o == nil {
		return
	}
	end := &t.Ends[e]
	end.Works = true
	if v := o.fields["clearance_percent"]; v != nil && strings.HasPrefix(v.Value, "-") {
		o.wrong("clearance_percent", "write the clearance volume in % of this end's swept volume; 10 to 40 is usual", "a negative clearance (%s) cannot be built", clip(v.Value))
	} else {
		t.Cylinder.Clearance[e] = o.num("clearance_percent", bounds{1, 300}, true) / 100
	}
	if id, ok := o.text("pressure", inputID, "the id of this end's pressure channel", false); ok {
		if r.refer(sk, join2(o.path, "pressure"), o.fields["pressure"], id, Pressure) {
			end.Pressure = id
		}
	}
	end.Suction = r.group(o, "suction", t.ID+"."+endIDs[e]+".s", t.Cylinder.Area(e))
	end.Discharge = r.group(o, "discharge", t.ID+"."+endIDs[e]+".d", t.Cylinder.Area(e))
}

// group reads the valves of one group: how many, what they share, and the tag of each cover temperature.
func (r *reader) group(o *object, key, prefix string, piston float64) []Valve {
	s := o.sub(key, true, "valves", "flow_area_mm2", "lift_mm", "spring_n_per_mm", "preload_n", "moving_mass_g", "covers")
	if s == nil {
		return nil
	}
	n, ok := s.whole("valves", 1, 16, true)
	one := Valve{
		FlowArea:       zero(s.num("flow_area_mm2", bounds{5, 200000}, false)) * 1e-6,
		Lift:           zero(s.num("lift_mm", bounds{0.2, 20}, false)) / 1e3,
		StiffnessNPerM: zero(s.num("spring_n_per_mm", bounds{0.01, 10000}, false)) * 1e3,
		PreloadN:       zero(s.num("preload_n", bounds{0.01, 10000}, false)),
		MassKg:         zero(s.num("moving_mass_g", bounds{0.1, 20000}, false)) / 1e3,
	}
	covers := s.list("covers", 1, 16, false, "list one process tag per valve, in the order of the valves; write none where there is no sensor")
	if !ok {
		return nil
	}
	if len(covers) > 0 && len(covers) != n {
		s.wrong("covers", "write one tag per valve, none where there is no sensor", "%d tags for %d valves", len(covers), n)
	}
	if total := float64(n) * one.FlowArea; total >= piston {
		s.wrong("flow_area_mm2", "write the effective flow area of one valve at full lift; all valves of a group have 5 to 12 % of the piston area", "%d valves would open %s mm², more than the piston has (%s mm²)", n, short(total*1e6), short(piston*1e6))
	}
	out := make([]Valve, n)
	for i := range out {
		out[i] = one
		out[i].ID = fmt.Sprintf("%s%d", prefix, i+1)
		if i >= len(covers) {
			continue
		}
		path := fmt.Sprintf("%s.covers[%d]", s.path, i)
		r.at[path] = place(covers[i])
		if tag, ok := r.word(covers[i], path, tagID, "a process tag: letters, digits and _ . / : -"); ok && tag != "none" {
			out[i].Cover = tag
		}
	}
	return out
}

// stages checks that the stages are numbered 1, 2, … without a hole, and that no cover tag serves two valves.
func (r *reader) stages(sk *Skid) {
	has, top := map[int]bool{}, 0
	tags := map[string]string{}
	for i, t := range sk.Throws {
		has[t.Stage] = true
		top = max(top, t.Stage)
		for e, end := range t.Ends {
			for k, group := range [2][]Valve{end.Suction, end.Discharge} {
				for j, v := range group {
					if v.Cover == "" {
						continue
					}
					if before := tags[v.Cover]; before != "" {
						path := fmt.Sprintf("throws[%d].%s.%s.covers[%d]", i, endKeys[e], [2]string{"suction", "discharge"}[k], j)
						r.problem(r.at[path], path, "every cover has its own sensor", "tag %s already belongs to %s", v.Cover, before)
					}
					tags[v.Cover] = v.ID
				}
			}
		}
	}
	for n := 1; n <= top; n++ {
		if !has[n] {
			r.problem(r.at["throws"], "throws", "number the stages 1, 2, … without a hole", "no throw belongs to stage %d, but one to stage %d", n, top)
			return
		}
	}
}
