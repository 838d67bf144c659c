package verdict

import (
	"math"
	"slices"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// middle is the median of a class over the blocks in memory; with fewer than three it counts nothing.
func (c *trial) middle(class int) float64 {
	var v []float64
	for _, m := range c.marks {
		if x := m.vote[class].llr; !math.IsNaN(x) {
			v = append(v, x)
		}
	}
	if len(v) < leastBlocks {
		return 0
	}
	return medianOf(v)
}

// weight is what a hypothesis has in its hands.
type weight struct {
	total  float64
	second float64 // second strongest class
	best   float64
	three  bool // one class at least advisoryClass in three of the last four blocks
	slow   bool // the sequential test has signalled and pressure agrees
}

func (c *trial) weigh() (w weight) {
	w.best, w.second = math.Inf(-1), math.Inf(-1)
	last := c.marks[max(0, len(c.marks)-4):]
	for k := range classes {
		m := c.middle(k)
		w.total += m
		if m > w.best {
			w.best, w.second = m, w.best
		} else if m > w.second {
			w.second = m
		}
		n := 0
		for _, b := range last {
			if b.vote[k].llr >= advisoryClass {
				n++
			}
		}
		w.three = w.three || n >= 3
	}
	if n := len(c.marks); n >= leastBlocks {
		w.slow = c.marks[n-1].slowSignal && c.middle(int(measure.Pressure)) > 0
	}
	return w
}

// grade moves a hypothesis's grade by one block.
func (j *Judge) grade(c *trial, blk duty.Block) {
	w := c.weigh()
	now, hold := None, None
	if w.three || w.slow {
		now = Advisory
	}
	if w.best >= holdClass {
		hold = Advisory
	}
	if !c.sensor {
		loss := c.loss()
		if w.total >= alertTotal && w.second >= alertClass {
			now = Alert
			if loss > j.cfg.DangerLossPercent {
				now = Danger
			}
		}
		if w.total >= holdTotal && w.second >= holdClass {
			hold = Alert
			if loss > 0.8*j.cfg.DangerLossPercent {
				hold = Danger
			}
		}
	}
	switch {
	case now > c.grade:
		if c.grade == None {
			c.since = blk.Turn1
			for _, m := range c.marks {
				if slices.ContainsFunc(m.vote[:], func(v vote) bool { return v.llr >= advisoryClass }) {
					c.since = m.turn
					break
				}
			}
		}
		c.grade, c.contrary = now, 0
	case hold >= c.grade:
		c.contrary = 0
	default:
		if c.contrary++; c.contrary >= j.cfg.Fade {
			c.grade, c.contrary = max(now, hold), 0
			if c.grade == None {
				c.slow, c.course = duty.Cusum{}, nil
			}
		}
	}
}

// loss is the median amplitude of a leak in per cent of the end's delivery; 0 when pressure has not sized it.
func (c *trial) loss() float64 {
	if c.kind != Leaking {
		return 0
	}
	g, _ := c.amplitude()
	if math.IsNaN(g) {
		return 0
	}
	return g
}

// amplitude gives the median amplitude and its spread; NaN when there are too few blocks.
func (c *trial) amplitude() (g, sd float64) {
	return c.over(func(m *mark) (float64, float64) { return m.g, m.sd })
}

func (c *trial) over(of func(m *mark) (float64, float64)) (v, sd float64) {
	var a, b []float64
	for i := range c.marks {
		if x, s := of(&c.marks[i]); !math.IsNaN(x) {
			a, b = append(a, x), append(b, s)
		}
	}
	if len(a) < leastBlocks {
		return math.NaN(), math.NaN()
	}
	return medianOf(a), medianOf(b)
}

// newest gives the last block's own number, once there are blocks enough to speak: sizes are told beside the same block's
// evidence, and the median of a leak that grows would be behind it.
func (c *trial) newest(of func(m *mark) (float64, float64)) (v, sd float64) {
	if len(c.marks) < leastBlocks {
		return math.NaN(), math.NaN()
	}
	return of(&c.marks[len(c.marks)-1])
}

// medianOf sorts v.
func medianOf(v []float64) float64 {
	slices.Sort(v)
	n := len(v)
	if n%2 == 1 {
		return v[n/2]
	}
	return (v[n/2-1] + v[n/2]) / 2
}
