// Package plant is the traffic with the plant's control system: its process values come in, alarms go out as registers.
//
//	Needs: a skid; the devices that its file names, or a CSV file beside a recording; the station's snapshots to show.
//	Waits: for nothing that others wait for: a value is held until the next, and for no longer than its tag says.
//	Emits: the skid.Process at any time, with its age; a register map over Modbus TCP.
//
// When it cannot: what a device or file does not give is not known: NaN in a line, a missing key among the covers, and,
// when nothing at all is known, Process.Known false. What neither names is taken from the skid file.
package plant

import (
	"math"
	"sort"
	"time"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// Series gives process values over time. It is read only and may be used from several goroutines.
type Series struct {
	base    skid.Process // of the skid file
	stages  int
	columns []column
	time    []float64   // s from the start of the recording, strictly increasing
	value   [][]float64 // one row per time, one number per column, in SI; NaN: not given
}

// column says where a number goes.
type column struct {
	name  string
	what  int    // one of the constants below
	stage int    // index into Stages
	valve string // for a cover
}

const (
	loadStep = iota
	pSuction
	pDischarge
	tSuction
	tDischarge
	coverTemperature
)

// Fixed gives the skid file's process values at every time, always fresh.
func Fixed(sk *skid.Skid) *Series {
	return &Series{base: sk.Process, stages: sk.Stages()}
}

// Rows is the number of rows read; 0 for fixed values.
func (s *Series) Rows() int { return len(s.time) }

// Span gives the times of the first and the last row, s; ok is false when there are none.
func (s *Series) Span() (first, last float64, ok bool) {
	if len(s.time) == 0 {
		return 0, 0, false
	}
	return s.time[0], s.time[len(s.time)-1], true
}

// At gives the process values at time t (s from the start of the recording): the last row at or before t, with its age.
// Before the first row, and for a t that is no number, the skid file's values hold. The Process is the caller's own.
func (s *Series) At(t float64) skid.Process {
	p := skid.Process{Step: s.base.Step, Known: s.base.Known, Stages: append([]skid.Line(nil), s.base.Stages...)}
	if len(s.base.Covers) > 0 {
		p.Covers = map[string]float64{}
		for k, v := range s.base.Covers {
			p.Covers[k] = v
		}
	}
	i := sort.Search(len(s.time), func(i int) bool { return s.time[i] > t }) - 1
	if i < 0 || math.IsNaN(t) {
		return p
	}
	p.Age = age(t - s.time[i])
	nan := math.NaN()
	for len(p.Stages) < s.stages {
		p.Stages = append(p.Stages, skid.Line{Ps: nan, Pd: nan, Ts: nan, Td: nan})
	}
	for j, c := range s.columns {
		v := s.value[i][j]
		switch c.what {
		case loadStep:
			if !math.IsNaN(v) {
				p.Step = int(v)
			}
		case pSuction:
			p.Stages[c.stage].Ps = v
		case pDischarge:
			p.Stages[c.stage].Pd = v
		case tSuction:
			p.Stages[c.stage].Ts = v
		case tDischarge:
			p.Stages[c.stage].Td = v
		case coverTemperature:
			cover(&p, c.valve, v)
		}
	}
	p.Known = anyKnown(&p)
	if !p.Known {
		p.Stages = nil
	}
	return p
}

// age turns seconds into a duration, held at the longest one.
func age(s float64) time.Duration {
	if s >= math.MaxInt64/1e9 {
		return math.MaxInt64
	}
	return time.Duration(s * 1e9)
}

// valves lists every valve's id, in the order of the skid file.
func valves(sk *skid.Skid) []string {
	var ids []string
	for _, t := range sk.Throws {
		for _, e := range [2]int{crank.HE, crank.CE} {
			for _, v := range append(append([]skid.Valve(nil), t.Ends[e].Suction...), t.Ends[e].Discharge...) {
				ids = append(ids, v.ID)
			}
		}
	}
	return ids
}
