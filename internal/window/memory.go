package window

import (
	"fmt"
	"math"
	"slices"

	"lapwing/internal/dsp"
)

// recent keeps the last values of something, oldest first.
type recent struct {
	v []float64
}

func (r *recent) push(x float64, most int) {
	if len(r.v) >= most {
		copy(r.v, r.v[1:])
		r.v = r.v[:len(r.v)-1]
	}
	r.v = append(r.v, x)
}

// centre gives the median and the robust scatter, in the scratch's memory; NaN of nothing.
func (r *recent) centre(scratch []float64) (median, sigma float64) {
	w := append(scratch[:0], r.v...)
	median = dsp.MedianInPlace(w)
	for i := range w {
		w[i] = math.Abs(w[i] - median)
	}
	return median, dsp.MADToSigma * dsp.MedianInPlace(w)
}

func (r *recent) count() int { return len(r.v) }

// opener is the memory of one end's suction or discharge opening.
type opener struct {
	lag      recent  // ms from the departure to the burst's peak
	offset   recent  // degrees, departure minus prediction
	rejected recent  // the same of departures not believed
	missed   int     // turns since the last believable one
	seen     bool    // ever found
	last     float64 // degrees, the last believable departure
}

// endMemory is what a tracker remembers of one end.
type endMemory struct {
	open   [2]opener // by stroke: Compression (discharge opens), Expansion (suction opens)
	late   float64   // degrees after the dead centre, the last late suction closing; 0: not late
	missed int       // turns without a late closing found
	idle   bool      // the last good turn showed no work
	heard  [2]recent // degrees after the dead centre, loudest and last burst of suction closings at full load
	lag    recent    // ms from a late suction closing to its burst
}

// Memory is a tracker's state in plain numbers, for JSON: what a restart should not have to learn again.
type Memory struct {
	Throws [][2]EndMemory `json:"throws"` // by throw, head end and crank end
}

// EndMemory is one end's part of it.
type EndMemory struct {
	DischargeOpens OpenMemory `json:"discharge_opens"`
	SuctionOpens   OpenMemory `json:"suction_opens"`
	LateDeg        float64    `json:"late_deg,omitempty"`    // last late suction closing, degrees after the dead centre
	LateMissed     int        `json:"late_missed,omitempty"` // turns since it was seen
	Idle           bool       `json:"idle,omitempty"`        // the last good turn showed no work
	LoudestDeg     []float64  `json:"loudest_deg,omitempty"` // suction closings heard at full load, degrees after the dead centre
	LastDeg        []float64  `json:"last_deg,omitempty"`    // likewise, the last burst of each
	LateLagMs      []float64  `json:"late_lag_ms,omitempty"` // late closing to impact
}

// OpenMemory is what was learnt of one opening. Lists are oldest first.
type OpenMemory struct {
	LagMs       []float64 `json:"lag_ms,omitempty"`       // departure to impact
	OffsetDeg   []float64 `json:"offset_deg,omitempty"`   // departure minus prediction
	RejectedDeg []float64 `json:"rejected_deg,omitempty"` // the same, of those not believed
	Missed      int       `json:"missed,omitempty"`
	Seen        bool      `json:"seen,omitempty"`
	LastDeg     float64   `json:"last_deg,omitempty"`
}

// Snapshot copies out what the tracker has learnt.
func (t *Tracker) Snapshot() Memory {
	var m Memory
	for i := range t.throws {
		var ends [2]EndMemory
		for e := range ends {
			s := &t.throws[i].memory[e]
			ends[e] = EndMemory{
				DischargeOpens: s.open[Compression].save(), SuctionOpens: s.open[Expansion].save(),
				LateDeg: s.late, LateMissed: s.missed, Idle: s.idle,
				LoudestDeg: slices.Clone(s.heard[0].v), LastDeg: slices.Clone(s.heard[1].v), LateLagMs: slices.Clone(s.lag.v),
			}
		}
		m.Throws = append(m.Throws, ends)
	}
	return m
}

func (o *opener) save() OpenMemory {
	return OpenMemory{LagMs: slices.Clone(o.lag.v), OffsetDeg: slices.Clone(o.offset.v),
		RejectedDeg: slices.Clone(o.rejected.v), Missed: o.missed, Seen: o.seen, LastDeg: o.last}
}

// Restore puts a snapshot back. One that does not fit this tracker's throws, or holds what is no number, is refused
// and changes nothing.
func (t *Tracker) Restore(m Memory) error {
	if want := len(t.throws); want != 0 && len(m.Throws) != want {
		return fmt.Errorf("window: restore: %d throws remembered, the machine has %d", len(m.Throws), want)
	}
	for i, ends := range m.Throws {
		for e := range ends {
			for _, o := range []OpenMemory{ends[e].DischargeOpens, ends[e].SuctionOpens} {
				if err := o.check(); err != nil {
					return fmt.Errorf("window: restore: throw %d end %d: %w", i, e, err)
				}
			}
			if err := checkList(heardTurns, ends[e].LoudestDeg, ends[e].LastDeg, ends[e].LateLagMs); err != nil {
				return fmt.Errorf("window: restore: throw %d end %d: %w", i, e, err)
			}
			if l := ends[e].LateDeg; !(l >= 0 && l < 180) || ends[e].LateMissed < 0 {
				return fmt.Errorf("window: restore: throw %d end %d: late closing %g° is none", i, e, l)
			}
		}
	}
	t.grow(len(m.Throws))
	for i, ends := range m.Throws {
		for e := range ends {
			s := &t.throws[i].memory[e]
			s.open[Compression].load(ends[e].DischargeOpens)
			s.open[Expansion].load(ends[e].SuctionOpens)
			s.late, s.missed, s.idle = ends[e].LateDeg, ends[e].LateMissed, ends[e].Idle
			s.heard[0].v = append(s.heard[0].v[:0], ends[e].LoudestDeg...)
			s.heard[1].v = append(s.heard[1].v[:0], ends[e].LastDeg...)
			s.lag.v = append(s.lag.v[:0], ends[e].LateLagMs...)
		}
	}
	return nil
}

func (m OpenMemory) check() error {
	if len(m.LagMs) > lagTurns || len(m.OffsetDeg) > offsetTurns || len(m.RejectedDeg) > reseedTurns {
		return fmt.Errorf("more turns remembered than are ever kept")
	}
	if m.Missed < 0 {
		return fmt.Errorf("missed turns are negative")
	}
	return checkList(lagTurns, m.LagMs, m.OffsetDeg, m.RejectedDeg, []float64{m.LastDeg})
}

// checkList refuses remembered lists that are longer than kept or hold what is no angle or lag.
func checkList(most int, lists ...[]float64) error {
	for _, list := range lists {
		if len(list) > most {
			return fmt.Errorf("more turns remembered than are ever kept")
		}
		for _, v := range list {
			if math.IsNaN(v) || math.Abs(v) > 1000 {
				return fmt.Errorf("%g is no remembered angle or lag", v)
			}
		}
	}
	return nil
}

func (o *opener) load(m OpenMemory) {
	o.lag.v = append(o.lag.v[:0], m.LagMs...)
	o.offset.v = append(o.offset.v[:0], m.OffsetDeg...)
	o.rejected.v = append(o.rejected.v[:0], m.RejectedDeg...)
	o.missed, o.seen, o.last = m.Missed, m.Seen, m.LastDeg
}
