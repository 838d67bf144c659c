package datum

// Mean gathers the mean turn of one cylinder at one duty.
type Mean struct {
	sum    [2][]float64
	closed [2][2]Range
	omega  []float64
	n      int
}

// Turns is how many turns are in it.
func (m *Mean) Turns() int { return m.n }

// Add takes one turn: the pressures of both ends on the grid (nil where there is no transducer), where the valves were
// shut, and the shaft speed on the grid in rad/s. Every turn must come on the same grid.
func (m *Mean) Add(p [2][]float64, closed [2][2]Range, omega []float64) {
	if m.n == 0 {
		m.closed = closed
		m.omega = make([]float64, len(omega))
	}
	for e := range p {
		if m.n == 0 && p[e] != nil {
			m.sum[e] = make([]float64, len(p[e]))
		}
		for i, v := range p[e] {
			m.sum[e][i] += v
		}
		for k, r := range closed[e] {
			was := &m.closed[e][k]
			was.From, was.To = max(was.From, r.From), min(was.To, r.To)
		}
	}
	for i, w := range omega {
		m.omega[i] += w
	}
	m.n++
}

// Duty gives the mean turn; the caller fills in line conditions and gas.
func (m *Mean) Duty() Duty {
	d := Duty{Closed: m.closed, Turns: m.n}
	for e, sum := range m.sum {
		for _, v := range sum {
			d.P[e] = append(d.P[e], v/float64(m.n))
		}
	}
	for _, w := range m.omega {
		d.Omega = append(d.Omega, w/float64(m.n))
	}
	return d
}
