package skid

import (
	"fmt"
	"math"
	"sort"

	"go.yaml.in/yaml/v3"
)

// standardGravity turns g into m/s² (CGPM 1901, exact).
const standardGravity = 9.80665

// channelKeys says which keys belong to which kind only.
var channelKeys = [...]struct {
	key  string
	kind Kind
}{
	{"mv_per_g", Acceleration}, {"valid_max_g", Acceleration},
	{"mv_per_bar", Pressure}, {"zero_is", Pressure}, {"points", Pressure},
	{"valid_min_bar_abs", Pressure}, {"valid_min_bar_gauge", Pressure},
	{"valid_max_bar_abs", Pressure}, {"valid_max_bar_gauge", Pressure},
	{"passage_hz", Pressure}, {"passage_q", Pressure},
	{"valid_min_v", PhaseMark}, {"valid_max_v", PhaseMark},
}

func (r *reader) channels(o *object, sk *Skid) {
	known := []string{"id", "input", "kind", "range_v", "zero_v"}
	for _, k := range channelKeys {
		known = append(known, k.key)
	}
	const fix = "list the inputs in use: - {id: …, input: 0, kind: phase | pressure | acceleration, range_v: …}"
	names, inputs := map[string]int{}, map[int]int{}
	sk.channelAt = map[string]string{}
	for i, n := range o.list("channels", 1, 256, true, fix) {
		path := fmt.Sprintf("channels[%d]", i)
		s := r.object(n, path, known...)
		if s == nil {
			continue
		}
		var c Channel
		var ok bool
		if c.ID, ok = s.text("id", inputID, "a short name of letters, digits, '_', '-' and '.'", true); ok {
			if j, double := names[c.ID]; double {
				s.wrong("id", "give each channel its own name", "channels[%d] is already called %s", j, c.ID)
			}
			names[c.ID] = i
			sk.channelAt[c.ID] = path
		}
		if c.Input, ok = s.whole("input", 0, 255, true); ok {
			if j, double := inputs[c.Input]; double {
				s.wrong("input", "every channel needs its own converter input, counted from 0", "input %d is already taken by channels[%d]", c.Input, j)
			}
			inputs[c.Input] = i
		}
		c.VoltsFull = s.num("range_v", bounds{0.01, 100}, true)
		if s.node("kind", true, "write kind: phase, pressure or acceleration") == nil {
			continue
		}
		c.Kind = Kind(s.choice("kind", "", string(PhaseMark), string(Pressure), string(Acceleration)))
		for _, k := range channelKeys {
			if c.Kind != "" && k.kind != c.Kind && s.has(k.key) {
				r.problem(s.keys[k.key], join2(path, k.key), "delete it, or correct kind", "this belongs to a channel of kind %s, this one is %s", k.kind, c.Kind)
			}
		}
		switch c.Kind {
		case PhaseMark:
			r.phaseScale(s, &c)
		case Acceleration:
			r.accelScale(s, &c)
		case Pressure:
			r.pressureScale(s, &c, sk.Machine.Atmosphere)
		}
		sk.Channels = append(sk.Channels, c)
	}
	sort.SliceStable(sk.Channels, func(i, j int) bool { return sk.Channels[i].Input < sk.Channels[j].Input })
}

func (r *reader) phaseScale(s *object, c *Channel) {
	c.Gain = 1
	c.ZeroV = s.zeroV(c, 0)
	volts := bounds{-100, 100}
	c.Min = s.numOr("valid_min_v", volts, -c.VoltsFull)
	c.Max = s.numOr("valid_max_v", volts, c.VoltsFull)
	r.minMax(s, c, "valid_min_v", "valid_max_v")
}

func (r *reader) accelScale(s *object, c *Channel) {
	c.Gain = standardGravity / (s.num("mv_per_g", bounds{0.1, 10000}, true) / 1e3)
	c.ZeroV = s.zeroV(c, 0)
	full := (c.VoltsFull - math.Abs(c.ZeroV)) * c.Gain / standardGravity
	c.Max = s.numOr("valid_max_g", bounds{0.1, 100000}, full) * standardGravity
	c.Min = -c.Max
}

// zeroV reads the voltage of zero; it must lie within the converter's range.
func (s *object) zeroV(c *Channel, def float64) float64 {
	if !s.has("zero_v") {
		return def
	}
	v := s.num("zero_v", bounds{-100, 100}, false)
	if math.Abs(v) >= c.VoltsFull {
		s.wrong("zero_v", "check range_v and zero_v", "%s V lies outside the converter's ±%s V", short(v), short(c.VoltsFull))
	}
	return v
}

// pressureScale reads either two points of the transmitter or its sensitivity with its zero. Channel.ZeroV is the
// voltage of 0 Pa absolute, so a gauge transmitter's zero moves down by the atmosphere.
func (r *reader) pressureScale(s *object, c *Channel, atm float64) {
	switch {
	case s.has("points") && (s.has("mv_per_bar") || s.has("zero_v") || s.has("zero_is")):
		s.wrong("points", "keep either points or mv_per_bar with zero_v and zero_is", "the scaling is given twice")
		return
	case s.has("points"):
		if !r.twoPoints(s, c, atm) {
			return
		}
	case s.has("mv_per_bar"):
		c.Gain = 1e5 / (s.num("mv_per_bar", bounds{0.01, 100000}, true) / 1e3)
		c.ZeroV = s.num("zero_v", bounds{-100, 100}, true)
		if s.node("zero_is", true, "write zero_is: absolute or gauge: what pressure the zero stands for") != nil &&
			s.choice("zero_is", "", "absolute", "gauge") == "gauge" {
			c.ZeroV -= atm / c.Gain
		}
	default:
		r.problem(s.at, s.path, "write points: [{v: 1, bar_abs: 0}, {v: 5, bar_abs: 100}], or mv_per_bar with zero_v and zero_is", "a pressure channel without scaling")
		return
	}
	full := (c.VoltsFull - c.ZeroV) * c.Gain
	b := bounds{-2, 5000}
	min := "valid_min_bar_abs"
	if c.Min = s.pressure("valid_min", b, false, atm); math.IsNaN(c.Min) && !s.has(min) && !s.has("valid_min_bar_gauge") {
		c.Min = s.numOr(min, b, 0) * 1e5
	}
	max := "valid_max_bar_abs"
	if c.Max = s.pressure("valid_max", b, false, atm); math.IsNaN(c.Max) && !s.has(max) && !s.has("valid_max_bar_gauge") {
		c.Max = s.numOr(max, b, full/1e5) * 1e5
	}
	r.minMax(s, c, min, max)
	c.Passage = zero(s.num("passage_hz", bounds{20, 20000}, false))
	c.PassageQ = zero(s.num("passage_q", bounds{0.3, 100}, false))
	if s.has("passage_q") && !s.has("passage_hz") {
		s.wrong("passage_q", "write passage_hz too", "the damping of a resonance without its frequency")
	}
}

func (r *reader) minMax(s *object, c *Channel, min, max string) {
	if c.Min >= c.Max {
		key := max
		if !s.has(max) {
			key = min
		}
		s.wrong(key, "the greatest believable value must exceed the least", "no value is valid")
	}
}

// twoPoints reads the scaling as two points of volts and pressure; false when it cannot be used.
func (r *reader) twoPoints(s *object, c *Channel, atm float64) bool {
	const fix = "write two: points: [{v: 1, bar_abs: 0}, {v: 5, bar_abs: 100}]"
	items := s.list("points", 2, 2, true, fix)
	if len(items) != 2 {
		return false
	}
	var v, p [2]float64
	for i, n := range items {
		o := r.object(n, fmt.Sprintf("%s.points[%d]", s.path, i), "v", "bar_abs", "bar_gauge")
		if o == nil {
			return false
		}
		v[i] = o.num("v", bounds{-100, 100}, true)
		p[i] = math.NaN()
		switch {
		case o.has("bar_abs") && o.has("bar_gauge"):
			o.wrong("bar_gauge", "keep one", "the same pressure is given twice")
		case o.has("bar_gauge"):
			p[i] = o.num("bar_gauge", bounds{-1.1, 5000}, true)*1e5 + atm
		case o.has("bar_abs"):
			p[i] = o.num("bar_abs", bounds{0, 5000}, true) * 1e5
		default:
			r.problem(o.at, o.path, "write bar_abs or bar_gauge beside v", "a point without a pressure")
		}
	}
	c.Gain = (p[1] - p[0]) / (v[1] - v[0])
	switch {
	case math.IsNaN(v[0] + v[1] + p[0] + p[1]):
		return false
	case v[0] == v[1]:
		s.wrong("points", "use two points of the transmitter's certificate with different voltages", "both points have %s V", short(v[0]))
		return false
	case p[0] == p[1]:
		s.wrong("points", "use two points of the transmitter's certificate with different pressures", "both points have the same pressure")
		return false
	case c.Gain < 0:
		s.wrong("points", "exchange the pressures or the voltages", "the pressure falls while the voltage rises")
		return false
	}
	c.ZeroV = v[0] - p[0]/c.Gain
	return true
}

// refer checks that a channel named elsewhere exists and is of the right kind, and says whether it may be used.
func (r *reader) refer(sk *Skid, path string, n *yaml.Node, id string, kind Kind) bool {
	var ids []string
	for _, c := range sk.Channels {
		if c.ID == id {
			if c.Kind != "" && c.Kind != kind {
				r.problem(place(n), path, "name a channel of kind "+string(kind), "channel %s is of kind %s", id, c.Kind)
				return false
			}
			return true
		}
		ids = append(ids, c.ID)
	}
	fix := "add it to channels"
	if near := nearest(id, ids); near != "" {
		fix = "did you mean " + near + "?"
	} else if len(ids) > 0 {
		fix = "known: " + list(ids)
	}
	r.problem(place(n), path, fix, "there is no channel %s", id)
	return false
}

// channelUse refuses one transducer on two places.
func (r *reader) channelUse(sk *Skid) {
	first := map[string]string{}
	use := func(path, id string) {
		if id == "" {
			return
		}
		if before, double := first[id]; double {
			r.problem(r.at[path], path, "one transducer sees one place: name another channel, or leave this one out", "channel %s is already used by %s", id, before)
			return
		}
		first[id] = path
	}
	for i, t := range sk.Throws {
		for e := range t.Ends {
			use(fmt.Sprintf("throws[%d].%s.pressure", i, endKeys[e]), t.Ends[e].Pressure)
		}
		for j, a := range t.Accel {
			use(fmt.Sprintf("throws[%d].accelerometers[%d]", i, j), a)
		}
	}
}
