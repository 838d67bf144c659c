package verdict

import (
	"fmt"
	"math"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// Explanation is how the newest block of a throw was judged: every hypothesis with its evidence, raised or not.
// Absent numbers are NaN. Numbers of evidence are in the feature's SI unit; log-likelihood ratios are natural.
type Explanation struct {
	Throw        int
	ID           string // of the throw
	Turn0, Turn1 int64
	Seq0, Seq1   int64
	Point        duty.Point
	Settled      bool // every turn was steady; otherwise deviations count for less
	Ends         [2]EndShown
	Cases        []Reasoning // in the order of judging: sensors first, then leaks, then what is heard
}

// EndShown says whether an end showed enough to be judged.
type EndShown struct {
	Subject  string // t1.he; empty: there is no such end
	Judged   bool
	Features int // pressure features present in the block
	Wanted   int // that it takes
}

// Reasoning is one hypothesis in one block.
type Reasoning struct {
	Subject, Kind string
	Sensor        bool  // about a channel, the gas or the geometry, not about a part that wears
	Grade         Grade // after this block
	Judged        bool
	Why           string      // why it was not judged
	Classes       []ClassVote // pressure, vibration, temperature, process
	Total         float64     // sum of the classes' medians: what Alert is measured by
	Pattern       Pattern     // what the pressures' whole pattern says
	Evidence      []Weighed   // every deviation that bears on it, class by class
	Missing       []string    // what the next grade would take
	Ambiguous     []string    // subjects that the evidence cannot tell from this one
}

// ClassVote is what one class of signal says.
type ClassVote struct {
	Class  measure.Class
	Raw    float64 // of this block, before caps and rules
	LLR    float64 // of this block, as it counts
	Median float64 // over the last blocks, the figure that grades; 0 when too few blocks have it
	Strong int     // of the last four blocks, how many reach what an advisory takes
	Why    string  // the rule that took from Raw, or why the class is absent
}

// Pattern is the pressures' vote before it is one: the amplitude of the hypothesis's whole pattern.
type Pattern struct {
	Known         bool
	Chosen        bool    // it explained most of what was left and took it
	Amplitude, SD float64 // % of the end's delivery, degrees, % of suction pressure, points of clearance, 0.01 of exponent
	Z             float64 // in spreads, the fitted leak area joined in
}

// Weighed is one deviation with its part in a hypothesis.
type Weighed struct {
	Class    measure.Class
	Feature  int // index in the layout
	Text     string
	Value    float64
	Expected float64
	Spread   float64
	Z        float64
	N        int     // turns behind it
	Sign     float64 // +1: speaks for the hypothesis when it is above what is expected, −1: below, 0: either
	Raw      float64 // log-likelihood ratio that it would have alone
	Weight   float64 // its part of the class's vote as it counts
}

// heardLast is what Explain needs of the block that was judged last.
type heardLast struct {
	blk    duty.Block
	press  [hPressures]fitted
	judged [2]bool
	shown  [2]int
}

// Explain tells how the block was judged that Judge took last; ok is false before the first. It costs nothing until it
// is asked, and changes nothing.
func (j *Judge) Explain() (x Explanation, ok bool) {
	if j.last == nil {
		return x, false
	}
	blk := &j.last.blk
	b := &j.throws[blk.Throw]
	x = Explanation{Throw: blk.Throw, ID: b.place.id, Turn0: blk.Turn0, Turn1: blk.Turn1, Seq0: blk.Seq0, Seq1: blk.Seq1,
		Point: blk.Point, Settled: blk.Settled}
	for e := range x.Ends {
		if b.place.ends[e].works {
			x.Ends[e] = EndShown{b.place.id + "." + endName[e], j.last.judged[e], j.last.shown[e], enough}
		}
	}
	for i := range b.cases {
		x.Cases = append(x.Cases, j.reason(b, &b.cases[i]))
	}
	return x, true
}

func (j *Judge) reason(b *bench, c *trial) Reasoning {
	r := Reasoning{Subject: c.subject, Kind: c.kind, Sensor: c.sensor, Grade: c.grade, Judged: true,
		Pattern: Pattern{Amplitude: math.NaN(), SD: math.NaN(), Z: math.NaN()}}
	if !c.judgeable(j.last.judged) {
		r.Judged, r.Why = false, b.unjudged(c, j.last)
		return r
	}
	if len(c.marks) == 0 || c.marks[len(c.marks)-1].turn != j.last.blk.Turn1 {
		r.Judged, r.Why = false, "too few openings or noise floors were measured to tell what they all share"
		return r
	}
	m := &c.marks[len(c.marks)-1]
	r.Ambiguous = m.ambiguous
	if c.h >= 0 && j.last.press[c.h].judged {
		f := &j.last.press[c.h]
		r.Pattern = Pattern{true, f.chosen, f.g, f.sd, f.z}
	}
	w := c.weigh()
	r.Total = w.total
	for k := range classes {
		v := &m.vote[k]
		cv := ClassVote{Class: measure.Class(k), Raw: v.raw, LLR: v.llr, Median: c.middle(k), Why: v.why}
		if math.IsNaN(v.llr) && v.why == "" {
			cv.Why = "nothing of this class was measured that bears on it"
		}
		for _, o := range c.marks[max(0, len(c.marks)-4):] {
			if o.vote[k].llr >= advisoryClass {
				cv.Strong++
			}
		}
		r.Classes = append(r.Classes, cv)
	}
	for _, s := range j.circles(b, c, &j.last.press) {
		r.Evidence = append(r.Evidence, j.weighed(b, c, s, m.vote[s.class].llr)...)
	}
	r.Missing = missing(c, w)
	return r
}

// weighed lists a class's deviations with their parts in its vote. What is too small to count has weight 0.
func (j *Judge) weighed(b *bench, c *trial, s circle, total float64) (out []Weighed) {
	sum, small := 0.0, true
	for k, i := range s.idx {
		if d := at(j.dev, i); d != nil && (s.sign == nil || d.Z*s.sign[k] > 0) && math.Abs(d.Z) >= 1 {
			small = false
		}
	}
	for k, i := range s.idx {
		d := at(j.dev, i)
		if d == nil {
			continue
		}
		z, sign := d.Z, 0.0
		if s.sign != nil {
			sign = math.Copysign(1, s.sign[k])
			z *= sign
		} else {
			z = math.Abs(z)
		}
		w := Weighed{Class: s.class, Feature: i, Text: j.text(b, c, i, d), Value: d.Value, Expected: d.Expected, Spread: d.Spread,
			Z: d.Z, N: d.N, Sign: sign, Raw: llr(z)}
		if (z >= 1 || small && z > 0) && total > 0 { // many small ones may make a large one together
			w.Weight = sq(clip(d.Z, 12))
			sum += w.Weight
		}
		out = append(out, w)
	}
	for k := range out {
		if sum > 0 {
			out[k].Weight *= total / sum
		}
	}
	return out
}

// unjudged says why a block could not say anything about a hypothesis.
func (b *bench) unjudged(c *trial, last *heardLast) string {
	for e := range b.place.ends {
		if (c.end == e || c.end < 0) && b.place.ends[e].works && !last.judged[e] {
			return fmt.Sprintf("%s.%s shows %d pressure features, and judging takes %d: idle, not followed, or its sensor is not used",
				b.place.id, endName[e], last.shown[e], enough)
		}
	}
	return "an end that it takes is not there"
}

// missing says in words what the next grade would take.
func missing(c *trial, w weight) (out []string) {
	if c.grade >= Danger || c.sensor && c.grade >= Advisory {
		return nil
	}
	if n := len(c.marks); n < leastBlocks {
		return []string{fmt.Sprintf("%d blocks judged; nothing is raised before %d", n, leastBlocks)}
	}
	if c.grade == None {
		return []string{fmt.Sprintf("for an advisory one class must reach %.1f in three of the last four blocks; the strongest has %.1f in the middle", advisoryClass, w.best)}
	}
	if c.grade == Alert {
		return []string{"for danger the loss must exceed the share that is called severe"}
	}
	if w.total < alertTotal {
		out = append(out, fmt.Sprintf("for an alert the classes together must reach %.1f; they have %.1f", alertTotal, w.total))
	}
	if w.second < alertClass {
		out = append(out, fmt.Sprintf("for an alert a second class must reach %.1f; the second strongest has %.1f", alertClass, math.Max(w.second, capLo)))
	}
	return out
}
