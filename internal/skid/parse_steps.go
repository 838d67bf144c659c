package skid

import (
	"fmt"
	"math"

	"go.yaml.in/yaml/v3"
)

// steps reads the load steps; a file without any has one, 0 "full".
func (r *reader) steps(o *object, sk *Skid) {
	if !o.has("load_steps") {
		sk.Steps = []Step{{Code: 0, Name: "full"}}
		r.defaulted = append(r.defaulted, "load_steps = one step, 0 full")
		return
	}
	const fix = "list the steps: - {code: 0, name: full load}"
	codes := map[int]int{}
	for i, n := range o.list("load_steps", 1, 100, true, fix) {
		path := fmt.Sprintf("load_steps[%d]", i)
		s := r.object(n, path, "code", "name", "pockets_percent", "pockets_cm3", "idle", "late_suction_closing_deg", "ripple")
		if s == nil {
			continue
		}
		st := Step{Pocket: map[string]float64{}, Idle: map[string]bool{}, Late: map[string]float64{}}
		var ok bool
		if st.Code, ok = s.whole("code", 0, 65535, true); ok {
			if j, double := codes[st.Code]; double {
				s.wrong("code", "give each step its own code", "load_steps[%d] already has code %d", j, st.Code)
			}
			codes[st.Code] = i
		}
		if st.Name, _ = s.text("name", nil, "a name for people", false); st.Name == "" {
			st.Name = fmt.Sprintf("step %d", st.Code)
		}
		r.perEnd(s, sk, "pockets_percent", bounds{0.1, 300}, func(name string, t, e int, at Place, p string, v float64) {
			st.Pocket[name] = v / 100
		})
		r.perEnd(s, sk, "pockets_cm3", bounds{1, 1e6}, func(name string, t, e int, at Place, p string, v float64) {
			if _, double := st.Pocket[name]; double {
				r.problem(at, p, "keep one", "the pocket of %s is given in %% and in cm³", name)
				return
			}
			if swept := sk.Throws[t].Cylinder.Swept(e); swept > 0 {
				st.Pocket[name] = v * 1e-6 / swept
			}
		})
		for j, n := range s.list("idle", 1, 24, false, "list the ends whose suction valves are held open: [t1.he]") {
			p := fmt.Sprintf("%s.idle[%d]", path, j)
			r.at[p] = place(n)
			name, ok := r.word(n, p, nil, "an end: t1.he")
			if !ok || !r.endNamed(sk, n, p, name) {
				continue
			}
			if st.Idle[name] {
				r.problem(place(n), p, "keep one", "%s is listed twice", name)
			}
			st.Idle[name] = true
		}
		r.perEnd(s, sk, "late_suction_closing_deg", bounds{1, 179}, func(name string, t, e int, at Place, p string, v float64) {
			if st.Idle[name] {
				r.problem(at, p, "keep one", "%s cannot be idle and close late in the same step", name)
			}
			st.Late[name] = v
		})
		st.Ripple = r.ripple(s)
		sk.Steps = append(sk.Steps, st)
	}
}

// perEnd reads a mapping of end name to number and hands each good pair over.
func (r *reader) perEnd(s *object, sk *Skid, key string, b bounds, good func(name string, t, e int, at Place, path string, v float64)) {
	_, u := split(key)
	keys, values := s.entries(key, false, "write `t1.he: …` below it")
	for i, k := range keys {
		path := join2(join2(s.path, key), clip(k.Value))
		if !r.endNamed(sk, k, path, k.Value) {
			continue
		}
		v, ok := r.number(values[i], path, u)
		if !ok {
			continue
		}
		if v < b.lo || v > b.hi || math.IsNaN(v) {
			r.problem(place(values[i]), path, "check the number and its unit; leave an end out that the step does not change",
				"%s %s is outside %s to %s %s", short(v), u.name, short(b.lo), short(b.hi), u.name)
			continue
		}
		t, e, _ := sk.findEnd(k.Value)
		good(k.Value, t, e, place(values[i]), path, v)
	}
}

// endNamed checks that a name is that of an end that works.
func (r *reader) endNamed(sk *Skid, n *yaml.Node, path, name string) bool {
	t, e, ok := sk.findEnd(name)
	if ok && sk.Throws[t].Ends[e].Works {
		return true
	}
	if ok {
		r.problem(place(n), path, "delete it, or give the throw its "+endKeys[e], "%s does not work: the throw has no %s", name, endKeys[e])
		return false
	}
	var all []string
	for t, th := range sk.Throws {
		for e := range th.Ends {
			if th.Ends[e].Works {
				all = append(all, sk.EndName(t, e))
			}
		}
	}
	r.problem(place(n), path, "the ends are: "+list(all), "there is no end %q", clip(name))
	return false
}

// process reads fixed process values. Without the section nothing is known and the line works from the traces.
func (r *reader) process(o *object, sk *Skid) {
	s := o.sub("process", false, "load_step", "stages")
	if s == nil {
		return
	}
	p := &sk.Process
	if len(sk.Steps) > 0 {
		p.Step = sk.Steps[0].Code
	}
	if code, ok := s.whole("load_step", 0, 65535, false); ok {
		if _, found := sk.FindStep(code); !found && len(sk.Steps) > 0 {
			s.wrong("load_step", "write a code of load_steps", "there is no load step %d", code)
		}
		p.Step = code
	}
	stages := sk.Stages()
	const fix = "list one entry per stage: - {p_suction_bar_abs: …, p_discharge_bar_abs: …, t_suction_c: …}"
	items := s.list("stages", 1, 12, true, fix)
	if len(items) > 0 && len(items) != stages && stages > 0 {
		s.wrong("stages", fix, "%d entries, but the throws make %d stages", len(items), stages)
	}
	for i, n := range items {
		e := r.object(n, fmt.Sprintf("process.stages[%d]", i), "p_suction_bar_abs", "p_suction_bar_gauge",
			"p_discharge_bar_abs", "p_discharge_bar_gauge", "t_suction_c", "t_discharge_c")
		if e == nil {
			continue
		}
		atm := sk.Machine.Atmosphere
		const zeroC = 273.15
		p.Stages = append(p.Stages, Line{
			Ps: e.pressure("p_suction", bounds{0.05, 1000}, true, atm),
			Pd: e.pressure("p_discharge", bounds{0.1, 4000}, true, atm),
			Ts: e.num("t_suction_c", bounds{-170, 150}, true) + zeroC,
			Td: e.num("t_discharge_c", bounds{-100, 300}, false) + zeroC,
		})
	}
	p.Known = len(p.Stages) > 0
}
