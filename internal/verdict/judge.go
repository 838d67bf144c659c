package verdict

import (
	"math"
	"slices"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// Config sets the judge. Zero values take the defaults.
type Config struct {
	DangerLossPercent float64        // a confirmed leak beyond this share of an end's delivery is danger; default 15
	Fade              int            // contrary blocks before a finding steps down; default 6
	Channels          []ThrowChannel // by throw: channel ids, so that a sensor finding names its sensor
	Start             float64        // s since 1970 of the sample clock's zero, so that a trend outlives a restart; 0: unknown
}

// ThrowChannel names a throw's sensors.
type ThrowChannel struct {
	Pressure [2]string
	Accel    string
}

// Thresholds of reference/vibration.md section 6, and the lower ones that hold a finding once raised.
const (
	advisoryClass = 3.0 // one class at least this, in three of the last four blocks
	alertTotal    = 8.0
	alertClass    = 2.5 // two classes at least this
	holdClass     = 1.0
	holdTotal     = 5.0
	history       = 5 // blocks that the medians go over
	leastBlocks   = 3
)

// Judge weighs the blocks of one machine. Not safe for concurrent use.
type Judge struct {
	cfg    Config
	layout measure.Layout
	throws []bench
	dev    []*duty.Deviation
	last   *heardLast // what Explain tells; nil before the first block
}

// bench is one throw's hypotheses and what has been heard on them.
type bench struct {
	place place
	cases []trial
	count [2]int // blocks in which each end could be judged
}

// trial is one hypothesis.
type trial struct {
	subject, kind string
	h             int // pressure hypothesis behind it, -1 none
	end, group    int // -1 for the whole throw
	sensor        bool
	marks         []mark // newest last, at most history
	slow          duty.Cusum
	grade         Grade
	since         int64
	contrary      int
	found         Finding
	along         string // the quantity that course is of
	course        course
}

// mark is one block's evidence on one hypothesis. NaN: absent.
type mark struct {
	turn       int64
	vote       [classes]vote
	g, sd      float64 // pressure amplitude
	area, aSd  float64 // m², of the deviation, and its standard deviation with all that is uncertain about it
	loss, lSd  float64 // the same as a share of the path's throughput
	slowSignal bool
	valve      string
	ambiguous  []string
	rather     string // of these, the one that the temperatures speak for
}

// New makes a judge of a layout.
func New(layout measure.Layout, cfg Config) *Judge {
	if cfg.DangerLossPercent <= 0 {
		cfg.DangerLossPercent = 15
	}
	if cfg.Fade <= 0 {
		cfg.Fade = 6
	}
	j := &Judge{cfg: cfg, layout: layout, dev: make([]*duty.Deviation, len(layout))}
	for t, p := range places(layout) {
		b := bench{place: p}
		channel := func(name func(c ThrowChannel) string, otherwise string) string {
			if t < len(cfg.Channels) && name(cfg.Channels[t]) != "" {
				return name(cfg.Channels[t])
			}
			return otherwise
		}
		add := func(subject, kind string, h, end, group int, sensor bool) {
			b.cases = append(b.cases, trial{subject: subject, kind: kind, h: h, end: end, group: group, sensor: sensor})
		}
		if !p.exists {
			j.throws = append(j.throws, b)
			continue
		}
		// Sensors first: what they are guilty of is no valve's fault.
		add(p.id, DeadCentre, hDead, -1, -1, true)
		add(p.id, GasChanged, hGas, -1, -1, true)
		for e := range p.ends {
			if p.ends[e].works {
				end := p.id + "." + endName[e]
				add(channel(func(c ThrowChannel) string { return c.Pressure[e] }, end), PressureZero, hZero+e, e, -1, true)
				add(end, Clearance, hClearance+e, e, -1, true)
			}
		}
		add(channel(func(c ThrowChannel) string { return c.Accel }, p.id), AccelGain, -1, -1, -1, true)
		for e := range p.ends {
			for g := range groupName {
				if p.ends[e].works {
					add(p.group(e, g), Leaking, hLeak+2*e+g, e, g, false)
				}
			}
		}
		if p.ends[0].works && p.ends[1].works {
			add(p.id+".rings", Leaking, hRings, -1, -1, false)
		}
		if p.ends[crank.CE].works {
			add(p.id+".packing", Leaking, hLeak+2, crank.CE, -1, false)
		}
		for e := range p.ends {
			for g := range groupName {
				if p.ends[e].works {
					add(p.group(e, g), ImpactingHard, hLeak+2*e+g, e, g, false)
					add(p.group(e, g), OpeningLate, hLeak+2*e+g, e, g, false)
					add(p.group(e, g), Fluttering, hLeak+2*e+g, e, g, false)
				}
			}
		}
		j.throws = append(j.throws, b)
	}
	return j
}

// Ready reports whether a throw's end has been judged often enough since the start that "no finding" means something:
// until then a standing alarm must be told that it cannot be judged.
func (j *Judge) Ready(throw, end int) bool {
	return throw < len(j.throws) && j.throws[throw].count[end] >= history
}

// Findings gives all standing findings, by throw.
func (j *Judge) Findings() []Finding {
	var out []Finding
	for t := range j.throws {
		for i := range j.throws[t].cases {
			if c := &j.throws[t].cases[i]; c.grade > None {
				out = append(out, c.found)
			}
		}
	}
	return out
}

// Judge takes one block and gives the throw's standing findings and those that ended with this block (grade None).
func (j *Judge) Judge(blk duty.Block) []Finding {
	if blk.Throw < 0 || blk.Throw >= len(j.throws) || !j.throws[blk.Throw].place.exists {
		return nil
	}
	b := &j.throws[blk.Throw]
	clear(j.dev)
	for i := range blk.Dev {
		if d := &blk.Dev[i]; d.Seen && d.Feature >= 0 && d.Feature < len(j.dev) && !math.IsNaN(d.Z) {
			j.dev[d.Feature] = d
		}
	}
	s := look(&b.place, j.layout, j.dev, blk.Settled)
	judged := [2]bool{s.n[0] >= enough, s.n[1] >= enough}
	for e := range judged {
		if judged[e] {
			b.count[e]++
		}
	}
	press := s.contrast()
	vib := listen(&b.place, j.layout, j.dev, blk.Settled, judged[0] && judged[1], blk.Point.RPM)
	temp := feel(&b.place, j.dev, blk.Settled)
	vib.knocks(&b.place, j.dev, blk.Point.RPM)
	b.sharePairs(&vib, &press)
	j.last = &heardLast{blk: blk, press: press, judged: judged, shown: s.n}

	var out []Finding
	doubt := [2]bool{}
	deaf := false
	for i := range b.cases {
		c := &b.cases[i]
		if !c.judgeable(judged) || c.kind == AccelGain && math.IsNaN(vib.gain.llr) {
			if c.grade > None {
				out = append(out, c.found)
			}
			if c.sensor && c.grade > None {
				b.doubts(c, &doubt, &deaf)
			}
			continue
		}
		m := j.mark(b, c, s, &press, &vib, &temp, doubt, deaf)
		m.turn = blk.Turn1
		for k, p := range [5]pathPlace{b.place.ends[0].path[0], b.place.ends[0].path[1], b.place.ends[1].path[0], b.place.ends[1].path[1], b.place.rings} {
			if c.kind == Leaking && c.h == k && !c.packing() {
				m.area, m.aSd, m.loss, m.lSd = j.sized(p, b.common(k, j.dev))
			}
		}
		c.marks = append(c.marks, m)
		if len(c.marks) > history {
			c.marks = slices.Delete(c.marks, 0, len(c.marks)-history)
		}
		was := c.grade
		j.grade(c, blk)
		if c.sensor && c.grade > None {
			b.doubts(c, &doubt, &deaf)
		}
		if c.grade > None || was > None {
			c.found = j.write(b, c, blk, &press)
			out = append(out, c.found)
		}
	}
	return out
}
