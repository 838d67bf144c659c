package verdict

import (
	"encoding/json"
	"fmt"
	"math"

	"lapwing/internal/duty"
)

// Snapshot is everything a Judge remembers, as plain JSON: with it a restart neither forgets a finding nor lets it sink
// to a lower grade until enough new blocks have come.
type Snapshot struct {
	Version int         `json:"version"`
	Throws  []throwSnap `json:"throws"`
}

const snapshotVersion = 1

type throwSnap struct {
	ID    string     `json:"id"`
	Count [2]int     `json:"count"`
	Cases []caseSnap `json:"cases,omitempty"`
}

type caseSnap struct {
	Subject  string     `json:"subject"`
	Kind     string     `json:"kind"`
	Grade    Grade      `json:"grade"`
	Since    int64      `json:"since"`
	Contrary int        `json:"contrary"`
	Slow     duty.Cusum `json:"slow"`
	Marks    []markSnap `json:"marks"`
	Found    *Finding   `json:"found,omitempty"`
	Along    string     `json:"along,omitempty"`
	Course   [][3]num   `json:"course,omitempty"` // time s, size, blocks
}

type markSnap struct {
	Turn      int64        `json:"turn"`
	LLR       [classes]num `json:"llr"`
	G         num          `json:"g"`
	SD        num          `json:"sd"`
	Area      num          `json:"area"`
	AreaSD    num          `json:"area_sd"`
	Loss      *num         `json:"loss,omitempty"` // nil: not known
	LossSD    *num         `json:"loss_sd,omitempty"`
	Slow      bool         `json:"slow,omitempty"`
	Valve     string       `json:"valve,omitempty"`
	Ambiguous []string     `json:"ambiguous,omitempty"`
}

// num is a number that may be absent: NaN here, null in JSON.
type num float64

func (n num) MarshalJSON() ([]byte, error) {
	if math.IsNaN(float64(n)) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(n))
}

func (n *num) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = num(math.NaN())
		return nil
	}
	return json.Unmarshal(b, (*float64)(n))
}

// Snapshot copies what the judge remembers.
func (j *Judge) Snapshot() Snapshot {
	s := Snapshot{Version: snapshotVersion, Throws: []throwSnap{}}
	for t := range j.throws {
		b := &j.throws[t]
		ts := throwSnap{ID: b.place.id, Count: b.count}
		for i := range b.cases {
			c := &b.cases[i]
			if len(c.marks) == 0 {
				continue
			}
			cs := caseSnap{Subject: c.subject, Kind: c.kind, Grade: c.grade, Since: c.since, Contrary: c.contrary, Slow: c.slow}
			for _, m := range c.marks {
				ms := markSnap{Turn: m.turn, G: num(m.g), SD: num(m.sd), Area: num(m.area), AreaSD: num(m.aSd), Slow: m.slowSignal, Valve: m.valve, Ambiguous: m.ambiguous}
				if !math.IsNaN(m.loss) {
					a, b := num(m.loss), num(m.lSd)
					ms.Loss, ms.LossSD = &a, &b
				}
				for k, v := range m.vote {
					ms.LLR[k] = num(v.llr)
				}
				cs.Marks = append(cs.Marks, ms)
			}
			if c.grade > None {
				f := c.found
				cs.Found, cs.Along = &f, c.along
				for _, p := range c.course {
					cs.Course = append(cs.Course, [3]num{num(p.t), num(p.v), num(p.n)})
				}
			}
			ts.Cases = append(ts.Cases, cs)
		}
		s.Throws = append(s.Throws, ts)
	}
	return s
}

// Restore takes up a snapshot. What the layout no longer has is dropped; on an error nothing has changed.
func (j *Judge) Restore(s Snapshot) error {
	if s.Version != snapshotVersion {
		return fmt.Errorf("verdict: restore: snapshot version %d, this program reads %d", s.Version, snapshotVersion)
	}
	for t := range j.throws {
		b := &j.throws[t]
		for _, ts := range s.Throws {
			if ts.ID != b.place.id {
				continue
			}
			b.count = ts.Count
			for i := range b.cases {
				for _, cs := range ts.Cases {
					if c := &b.cases[i]; cs.Subject == c.subject && cs.Kind == c.kind {
						c.restore(cs)
					}
				}
			}
		}
	}
	return nil
}

func (c *trial) restore(cs caseSnap) {
	c.grade, c.since, c.contrary, c.slow, c.found = cs.Grade, cs.Since, cs.Contrary, cs.Slow, Finding{}
	if cs.Found != nil {
		c.found = *cs.Found
	}
	c.along, c.course = cs.Along, nil
	for _, p := range cs.Course[max(0, len(cs.Course)-coursePoints+1):] {
		c.course = append(c.course, point{float64(p[0]), float64(p[1]), float64(p[2])})
	}
	c.marks = nil
	for _, ms := range cs.Marks[max(0, len(cs.Marks)-history):] {
		m := mark{turn: ms.Turn, g: float64(ms.G), sd: float64(ms.SD), area: float64(ms.Area), aSd: float64(ms.AreaSD), slowSignal: ms.Slow, valve: ms.Valve, ambiguous: ms.Ambiguous}
		m.loss, m.lSd = math.NaN(), math.NaN()
		if ms.Loss != nil && ms.LossSD != nil {
			m.loss, m.lSd = float64(*ms.Loss), float64(*ms.LossSD)
		}
		for k, l := range ms.LLR {
			m.vote[k] = vote{llr: float64(l), raw: math.NaN()}
		}
		c.marks = append(c.marks, m)
	}
}
