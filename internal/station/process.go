package station

import (
	"math"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/skid"
)

// row is the process values in force from one whole second of sample clock on.
type row struct {
	second int64
	seq    int64
	proc   skid.Process
}

// rowClock samples process values at whole seconds of sample clock, as samples arrive. The values are rounded as a
// CSV file would hold them: what the tape stores and a review reads back is then exactly what the line saw.
type rowClock struct {
	begun bool
	next  int64 // second
}

func (c *rowClock) rows(b *acq.Block, rate float64, from processAt) (out []row) {
	t0, t1 := float64(b.Seq0)/rate, float64(b.Seq0+int64(b.N))/rate
	if !c.begun {
		c.begun, c.next = true, int64(t0)
	}
	for ; float64(c.next) < t1; c.next++ {
		if float64(c.next) < t0-1 {
			c.next = int64(math.Ceil(t0 - 1)) // a gap: what held in it does not matter
		}
		out = append(out, row{second: c.next, seq: max(b.Seq0, int64(float64(c.next)*rate)), proc: quantise(from(float64(c.next)))})
	}
	return out
}

// held keeps the rows of the last minutes for the line.
type held struct {
	rows   map[int64]skid.Process
	newest int64
}

const keepRows = 300 // s; the line is a few turns behind the samples

func newHeld() *held { return &held{rows: map[int64]skid.Process{}} }

func (h *held) put(r row) {
	h.rows[r.second] = r.proc
	h.newest = max(h.newest, r.second)
	delete(h.rows, r.second-keepRows)
}

// at gives the row in force at t seconds; the values age within their second.
func (h *held) at(t float64) skid.Process {
	p, ok := h.rows[int64(t)]
	if !ok {
		return skid.Process{}
	}
	p.Age += time.Duration((t - float64(int64(t))) * float64(time.Second))
	return p
}

// quantise rounds process values to what their instruments could tell at best: 1 Pa and 1 mK. The same values then
// come back from every file they pass through.
func quantise(p skid.Process) skid.Process {
	q := p
	q.Stages = make([]skid.Line, len(p.Stages))
	for i, l := range p.Stages {
		q.Stages[i] = skid.Line{Ps: math.Round(l.Ps), Pd: math.Round(l.Pd), Ts: math.Round(l.Ts*1e3) / 1e3, Td: math.Round(l.Td*1e3) / 1e3}
	}
	if p.Covers != nil {
		q.Covers = make(map[string]float64, len(p.Covers))
		for k, v := range p.Covers {
			q.Covers[k] = math.Round(v*1e3) / 1e3
		}
	}
	return q
}
