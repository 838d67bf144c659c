package measure

import (
	"fmt"
	"math"
	"slices"

	"lapwing/internal/window"
)

// Memory is what a measurer has learnt, for JSON: with it a restart need not wait for templates and hits again.
type Memory struct {
	Throws []ThrowMemory `json:"throws"` // in the machine's order
}

// ThrowMemory is one throw's part: head end and crank end, by event.
type ThrowMemory struct {
	ID   string                        `json:"throw"`
	Ends [2][window.Events]EventMemory `json:"ends"`
}

// EventMemory is what was learnt of one event.
type EventMemory struct {
	Count int       `json:"count,omitempty"`    // events behind the template
	LagMs float64   `json:"lag_ms,omitempty"`   // onset after the pressure's angle
	Level float64   `json:"level_ln,omitempty"` // of the booked impact over the template's power
	Cells []float64 `json:"template,omitempty"` // band powers by time and band, sum 1
	Hits  []int     `json:"hits,omitempty"`     // extra hits of the last turns, oldest first
}

// Snapshot copies out what has been learnt.
func (m *Measurer) Snapshot() Memory {
	out := Memory{Throws: slices.Clone(m.memory)}
	for i := range out.Throws {
		for e := range out.Throws[i].Ends {
			for k := range out.Throws[i].Ends[e] {
				x := &out.Throws[i].Ends[e][k]
				x.Cells, x.Hits = slices.Clone(x.Cells), slices.Clone(x.Hits)
			}
		}
	}
	return out
}

// Restore puts a snapshot back. Throws that the machine has not are passed over; what is damaged is refused and changes
// nothing.
func (m *Measurer) Restore(s Memory) error {
	for i := range s.Throws {
		for e := range s.Throws[i].Ends {
			for k := range s.Throws[i].Ends[e] {
				if err := s.Throws[i].Ends[e][k].check(); err != nil {
					return fmt.Errorf("measure: restore: %s.%s.%s: %w", s.Throws[i].ID, EndName(e), EventName(window.Event(k)), err)
				}
			}
		}
	}
	for i := range m.memory {
		for j := range s.Throws {
			if t := &s.Throws[j]; t.ID == m.memory[i].ID {
				m.memory[i] = *t
				for e := range t.Ends {
					for k := range t.Ends[e] {
						x := &m.memory[i].Ends[e][k]
						x.Cells, x.Hits = slices.Clone(x.Cells), slices.Clone(x.Hits)
					}
				}
			}
		}
	}
	return nil
}

func (x *EventMemory) check() error {
	if x.Count < 0 || x.Count > templateFull || len(x.Hits) > hitTurns {
		return fmt.Errorf("more remembered than is ever kept")
	}
	if len(x.Cells) != frameCount*bandCount && (len(x.Cells) != 0 || x.Count != 0) {
		return fmt.Errorf("a template of %d cells, this program's have %d", len(x.Cells), frameCount*bandCount)
	}
	for _, v := range x.Cells {
		if !(v >= 0 && v <= 1) {
			return fmt.Errorf("%g is no share of a template", v)
		}
	}
	for _, h := range x.Hits {
		if h < 0 || h > mostHits {
			return fmt.Errorf("%d extra hits in a turn", h)
		}
	}
	if !(math.Abs(x.LagMs) < 1000 && math.Abs(x.Level) < 1000) {
		return fmt.Errorf("lag %g ms, level %g", x.LagMs, x.Level)
	}
	return nil
}
