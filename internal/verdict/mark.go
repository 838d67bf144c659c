package verdict

import (
	"math"
	"slices"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

func (c *trial) packing() bool { return c.kind == Leaking && c.group < 0 && c.h != hRings }

// judgeable tells whether the block can say anything about a hypothesis.
func (c *trial) judgeable(judged [2]bool) bool {
	switch {
	case c.end >= 0:
		return judged[c.end]
	case c.h == hRings || c.h == hGas:
		return judged[0] && judged[1]
	}
	return judged[0] || judged[1]
}

// doubts withdraws what a doubtful sensor bears on.
func (b *bench) doubts(c *trial, doubt *[2]bool, deaf *bool) {
	switch {
	case c.kind == AccelGain:
		*deaf = true
	case c.end >= 0:
		doubt[c.end] = true
	default:
		doubt[0], doubt[1] = true, true
	}
}

// sharePairs books what vibration heard of a pair. Pressure decides between the two; where it is silent the one that
// has a finding already, else the louder, takes the evidence, so that one leak does not cry twice.
func (b *bench) sharePairs(v *heard, press *[hPressures]fitted) {
	for _, h := range [2]int{0, 1} {
		q := partner(h)
		// Of a blow in a window that both share one of the two is told, and the other with it.
		if v.either[h] && v.either[q] && v.hard[h].llr > 0 && v.hard[q].llr > 0 {
			no := h
			if b.hits(h) || !b.hits(q) && v.hard[h].raw >= v.hard[q].raw {
				no = q
			}
			v.hard[no].most(0, "booked on "+b.place.path(partner(no))+", which shares its window")
		}
		if math.IsNaN(v.leak[h].llr) || math.IsNaN(v.leak[q].llr) {
			continue
		}
		pair := func(yes, no int) {
			v.leak[no].most(0, b.place.path(yes)+", which blows at the same angles, takes the noise")
		}
		hp, qp := press[h].chosen && press[h].llr >= alertClass, press[q].chosen && press[q].llr >= alertClass
		switch {
		case hp && qp: // both leak, says pressure: both are heard
		case hp:
			pair(h, q)
		case qp:
			pair(q, h)
		case b.standing(h) != b.standing(q):
			if b.standing(h) {
				pair(h, q)
			} else {
				pair(q, h)
			}
		case v.noiseZ[h] >= v.noiseZ[q]:
			pair(h, q)
		default:
			pair(q, h)
		}
	}
}

// ringsExplain tells whether a pattern of suction leakage is taken for that of rings that are known to leak: with the
// other end idle the two cannot be told apart (reference/leaks.md section 2). A suction finding of its own stays.
func (b *bench) ringsExplain(c *trial, s *sight) bool {
	if c.kind != Leaking || c.group != suction || c.grade > None || s.n[1-c.end] >= enough {
		return false
	}
	for i := range b.cases {
		if r := &b.cases[i]; r.kind == Leaking && r.h == hRings {
			return r.grade > None
		}
	}
	return false
}

func (b *bench) standing(h int) bool { return b.stands(h, Leaking) }

func (b *bench) hits(h int) bool { return b.stands(h, ImpactingHard) }

// stands tells whether a group has a finding of a kind.
func (b *bench) stands(h int, kind string) bool {
	for i := range b.cases {
		if c := &b.cases[i]; c.kind == kind && c.h == h && c.group >= 0 && c.grade > None {
			return true
		}
	}
	return false
}

// shadow is the share of a standing leak that another path of the throw must exceed to be a leak of its own: cross-talk
// of the leak fit is up to 5 % (reference/leaks.md section 1, worst cell), and hot gas from a big leak bends the other
// end's lines a little too.
const shadow = 0.05

// standingLeak gives the size of the throw's largest standing valve leak other than c, in the unit of the pressure
// patterns; 0 when there is none.
func (b *bench) standingLeak(c *trial) (g float64) {
	for i := range b.cases {
		o := &b.cases[i]
		if o == c || o.kind != Leaking || o.group < 0 || o.grade == None || len(o.marks) == 0 {
			continue
		}
		if last := o.marks[len(o.marks)-1].g; last > g {
			g = last
		}
	}
	return g
}

// mark gathers a block's evidence on one hypothesis.
func (j *Judge) mark(b *bench, c *trial, s *sight, press *[hPressures]fitted, v *heard, t *felt, doubt [2]bool, deaf bool) mark {
	m := noMark()
	end := [2]string{b.place.id + "." + endName[0], b.place.id + "." + endName[1]}
	withdrawn := ""
	for e := range doubt {
		if doubt[e] && (c.end == e || c.end < 0) {
			withdrawn = "the pressure of " + end[e] + " is in doubt"
		}
	}
	pressure, vibration, temperature := &m.vote[measure.Pressure], &m.vote[measure.Vibration], &m.vote[measure.Temperature]
	if c.sensor {
		if c.kind == AccelGain {
			*vibration = v.gain
			m.g = v.shift
			return m
		}
		if f := press[c.h]; f.judged {
			m.g, m.sd = f.g, f.sd
			*pressure = f.vote
			if !f.first { // only what explains the block best accuses a sensor
				pressure.most(0, "another pattern explains these pressures first")
			}
		}
		return m
	}
	leaks := c.kind != Leaking && c.group >= 0 && b.standing(c.h)
	if leaks && (c.kind == OpeningLate || c.kind == Fluttering) && c.grade == None {
		return m // a leak blurs the departure that the lag is counted from
	}
	explained := b.ringsExplain(c, s)
	f := press[c.h]
	switch {
	case !f.judged:
	case withdrawn != "":
		pressure.why = withdrawn
	case explained:
		pressure.why = "the rings are known to leak, and with the other end idle they read as this"
	case c.kind == Leaking:
		*pressure, m.g, m.sd = f.vote, f.g, f.sd
		m.slowSignal = c.slow.Step(f.z) >= 1
		if f.areaZ < areaLeast { // a clipped or a blocked transducer bends everything but leaks nothing (NaN is not less)
			pressure.most(0, "the closed strokes show no leak of this path")
			m.slowSignal = false
		}
		if c.grade == None && f.g < shadow*b.standingLeak(c) {
			pressure.most(0, "less than a twentieth of the leak that stands beside it")
			m.slowSignal = false
		}
	case c.kind == ImpactingHard: // a broken plate also leaks: that is its second witness
		if f.chosen && f.llr > 0 && v.hard[c.h].llr >= 1 && !v.either[c.h] {
			*pressure = f.vote
		}
	}
	// A loss alone may be anything: dirt, gas, speed. It counts beside a late impact, or where the impact is not heard
	// for itself beside a late departure.
	if unheard := c.kind == OpeningLate && math.IsNaN(v.late[c.h].llr); c.kind == OpeningLate && withdrawn == "" && (unheard || v.late[c.h].llr >= 1) {
		ep := &b.place.ends[c.end]
		z := beyondCrossing(j.dev, ep.open[c.group], ep.late[c.group])
		if d := at(j.dev, ep.loss[c.group]); d != nil && !math.IsNaN(z) {
			*pressure = votes(math.Min(z, d.Z)) // late and costly
			if unheard && b.lateAlike(c.group, j.dev) {
				pressure.most(0, "both ends are late alike: a wrong duty, not two valves")
			}
		}
	}
	// Hard impacts and late openings are heard, or they are not there: other classes only join in. A leak that is known
	// explains the warm cover.
	heardIt := c.kind == Leaking || c.kind == ImpactingHard && v.hard[c.h].llr >= 1 || c.kind == OpeningLate && v.late[c.h].llr >= 1 ||
		c.kind == Fluttering && v.loose[c.h].llr >= 1
	if c.group >= 0 && heardIt && !leaks {
		*temperature = t.group[c.h]
		m.valve = t.valve[c.h]
	}
	if deaf {
		vibration.why = "the accelerometer is in doubt"
	}
	switch {
	case c.packing():
		b.markPacking(c, &m, v, t)
	case c.kind == Leaking:
		if !deaf && !explained {
			*vibration = v.leak[c.h]
			if f.judged && f.areaZ < areaLeast { // noise may come from elsewhere: a plate that flutters, a packing, a bearing
				vibration.most(noiseAlone, "the closed strokes show no leak of this path")
			}
		}
		if c.h == hRings {
			if s.noRings {
				m.ambiguous = []string{b.place.group(crank.HE, suction), b.place.group(crank.CE, suction)}
			}
			*temperature = t.rings
			if c.grade == None && b.standingLeak(c) > 0 {
				temperature.most(0, "a valve that leaks warms the discharge gas as well")
			}
		} else {
			m.ambiguous = s.structural(&b.place, c.end, c.group)
			if !(f.chosen && f.llr >= alertClass) && pairOf[c.h] == v.best && v.leak[c.h].llr > 0 {
				q := partner(c.h)
				if b.place.ends[q/2].works {
					m.ambiguous = append(m.ambiguous, b.place.group(q/2, q%2))
				}
			}
			if m.valve != "" { // a leaking packing warms no cover; it may well be heard
				m.ambiguous = slices.DeleteFunc(m.ambiguous, func(s string) bool { return s == b.place.id+".packing" })
			}
			m.rather = b.ratherPacking(c, &m, t)
			if b.quietPacking(v, t) && c.end == crank.CE && c.group == suction {
				pressure.most(0, "valves quiet and gas no warmer: the packing's case")
			}
		}
	case c.kind == ImpactingHard && !deaf:
		*vibration = v.hard[c.h]
		if v.knock[c.h] && v.hard[c.h].llr > 0 {
			m.ambiguous = append(m.ambiguous, b.place.id+".crosshead")
		}
		b.eitherOf(c, v, v.hard[c.h].llr, &m)
	case c.kind == OpeningLate && !deaf:
		*vibration = v.late[c.h]
	case c.kind == Fluttering && !deaf:
		*vibration = v.loose[c.h]
		b.eitherOf(c, v, v.loose[c.h].llr, &m)
	}
	return m
}

// eitherOf names the partner whose opening shares the window that something was heard in.
func (b *bench) eitherOf(c *trial, v *heard, llr float64, m *mark) {
	if q := partner(c.h); v.either[c.h] && llr > 0 && b.place.ends[q/2].works {
		m.ambiguous = append(m.ambiguous, b.place.path(q))
	}
}

// lateAlike tells whether a group's departures are late at both ends.
func (b *bench) lateAlike(g int, dev []*duty.Deviation) bool {
	for e := range b.place.ends {
		if z := beyondCrossing(dev, b.place.ends[e].open[g], b.place.ends[e].late[g]); !(z > 1.5) {
			return false
		}
	}
	return true
}

// areaLeast is the least rise of a path's fitted area, in spreads, without which no pattern makes a leak of it: the areas
// decide and name the path (reference/leaks.md section 4).
const areaLeast = 1.0

// noiseAlone is all that noise may say of a path on which pressure, that can see it, sees no leak: less than an advisory.
const noiseAlone = 2.0

// noMark is a block that says nothing.
func noMark() mark {
	nan := math.NaN()
	m := mark{g: nan, sd: nan, area: nan, aSd: nan, loss: nan, lSd: nan}
	for k := range m.vote {
		m.vote[k] = silent
	}
	return m
}

// quietPacking tells whether a crank-end suction pattern must be the packing: valves quiet, gas no warmer. Both
// witnesses must have been heard.
func (b *bench) quietPacking(v *heard, t *felt) bool {
	return v.leak[2].llr <= -1 && v.noiseZ[2] < 1 && !math.IsNaN(t.ofTd) && t.ofTd < 1
}

// coverTurns is how long covers must have had to warm up, and ratherLoss how much must leak, before cold ones say anything.
const (
	coverTurns = 300
	ratherLoss = 2.0 // % of the end's delivery
)

// ratherPacking names the packing where a crank end's suction pattern has stood long and strong and no cover of the group
// is any warmer: gas that goes back through a suction valve heats it, gas that leaves by the packing does not.
func (b *bench) ratherPacking(c *trial, m *mark, t *felt) string {
	if c.end != crank.CE || c.group != suction || c.grade == None || !(m.g >= ratherLoss) || !t.cold[c.h] {
		return ""
	}
	if n := len(c.marks); n < history-1 || c.marks[n-1].turn-c.since < coverTurns {
		return ""
	}
	return b.place.id + ".packing"
}

func (b *bench) markPacking(c *trial, m *mark, v *heard, t *felt) {
	if !b.quietPacking(v, t) {
		m.vote[measure.Pressure].most(0, "a packing is taken for it only where the valves are quiet and the gas no warmer")
	}
	m.ambiguous = []string{b.place.group(crank.CE, suction)}
}
