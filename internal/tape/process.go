package tape

import (
	"math"

	"lapwing/internal/skid"
)

// ProcessRow is the process values in force from one sample on, in SI units as skid.Process has them. A value that is
// not known is absent.
type ProcessRow struct {
	Seq    int64              `json:"seq"`
	Step   int                `json:"step"`
	Stages []LineRow          `json:"stages,omitempty"`
	Covers map[string]float64 `json:"covers_k,omitempty"` // by valve id
}

// LineRow is one stage's lines.
type LineRow struct {
	Ps *float64 `json:"ps_pa,omitempty"`
	Pd *float64 `json:"pd_pa,omitempty"`
	Ts *float64 `json:"ts_k,omitempty"`
	Td *float64 `json:"td_k,omitempty"`
}

// processRow is p in force from sample seq on; ok is false when nothing is known.
func processRow(seq int64, p skid.Process) (row ProcessRow, ok bool) {
	if !p.Known {
		return row, false
	}
	row = ProcessRow{Seq: seq, Step: p.Step}
	for _, l := range p.Stages {
		row.Stages = append(row.Stages, LineRow{Ps: known(l.Ps), Pd: known(l.Pd), Ts: known(l.Ts), Td: known(l.Td)})
	}
	for id, k := range p.Covers {
		if known(k) != nil {
			if row.Covers == nil {
				row.Covers = make(map[string]float64, len(p.Covers))
			}
			row.Covers[id] = k
		}
	}
	return row, true
}

// Process gives the row back as the line knows it. Age is not kept: it is zero.
func (r *ProcessRow) Process() skid.Process {
	p := skid.Process{Step: r.Step, Known: true}
	for _, l := range r.Stages {
		p.Stages = append(p.Stages, skid.Line{Ps: orNaN(l.Ps), Pd: orNaN(l.Pd), Ts: orNaN(l.Ts), Td: orNaN(l.Td)})
	}
	for id, k := range r.Covers {
		if p.Covers == nil {
			p.Covers = make(map[string]float64, len(r.Covers))
		}
		p.Covers[id] = k
	}
	return p
}

func known(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

func orNaN(v *float64) float64 {
	if v == nil {
		return math.NaN()
	}
	return *v
}
