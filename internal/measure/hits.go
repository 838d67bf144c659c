package measure

import (
	"math"

	"lapwing/internal/window"
)

// Extra hits: a plate that strikes again after its opening is broken or flutters. A hit is a peak of the envelope that
// stands out of what came just before it, not out of the main peak (vibration.md section 4).
const (
	hitRatio  = 2.5 // over the median envelope of …
	hitFromMs = 1.6 // … this long before it …
	hitToMs   = 0.4 // … to this long before it
	hitStepMs = 0.1
	hitsMs    = 2.0  // after the onset, where the search begins
	hitsDeg   = 42.0 // after the onset, where it ends
	hitRestMs = 1.0  // from one hit to the next
	hitTurns  = 45   // turns that extra_hits_45 counts over
	mostHits  = 100  // counted in one turn
	leastHits = 0.25 // share of the stretch that must be free of other events
)

const (
	whyHitsBusy = "other events ring wherever an extra hit could be heard"
	whyHitsFew  = "not yet heard in 45 turns"
)

// hits counts the extra hits after an opening. Known events of this throw and of the others are left out.
func (m *Measurer) hits(c *throwCtx, s spot, at int) {
	count, why := m.countHits(c, s)
	mem := &m.memory[c.i].Ends[s.e][s.k]
	if why != "" {
		c.dst.absent(at+vHits, why)
		c.dst.absent(at+vHits45, why)
		return
	}
	c.dst.set(at+vHits, float64(count))
	if len(mem.Hits) == hitTurns {
		mem.Hits = mem.Hits[:copy(mem.Hits, mem.Hits[1:])]
	}
	mem.Hits = append(mem.Hits, min(count, mostHits))
	if len(mem.Hits) < hitTurns {
		c.dst.absent(at+vHits45, whyHitsFew)
		return
	}
	sum := 0.0
	for _, h := range mem.Hits {
		sum += float64(h)
	}
	c.dst.set(at+vHits45, sum)
}

func (m *Measurer) countHits(c *throwCtx, s spot) (int, string) {
	b := &c.heard[s.e][s.k]
	if b.why != "" {
		return 0, b.why
	}
	if math.IsNaN(b.onset) {
		return 0, whyNoOnset
	}
	if c.dst.Marks[c.i][s.e][s.k].Sharing == CrossTalk {
		return 0, whyCrossTalk
	}
	v := &c.th.Vib[b.loud]
	step := max(1, int(math.Round(hitStepMs*v.Rate/1000)))
	ms := func(x float64) int { return int(math.Round(x / hitStepMs)) }
	from := int(place(v, b.onset)) + step*(ms(hitsMs)-ms(hitFromMs))
	to := min(int(place(v, c.th.SampleAt(b.deg+hitsDeg))), len(v.X))
	n := (to - from) / step
	if n <= ms(hitFromMs) || from < 0 {
		return 0, whyCutBack
	}
	// The envelope, one value a step, and which steps belong to known events.
	if cap(m.env) < n {
		m.env = make([]float64, 2*n)
	}
	m.env = m.env[:n]
	for i := range m.env {
		sum := 0.0
		for _, a := range v.X[from+i*step : from+(i+1)*step] {
			sum += math.Abs(a)
		}
		m.env[i] = sum / float64(step)
	}
	m.busy = append(m.busy[:0], make([]bool, n)...)
	m.maskHits(c, s, float64(v.Seq0)-v.Late+float64(from), step)
	limit := 4 * math.Sqrt(b.loudBack)
	hits, rest, free := 0, 0, 0
	for i := ms(hitFromMs); i < n; i++ {
		if m.busy[i] {
			continue
		}
		free++
		if rest--; rest > 0 || m.env[i] <= limit {
			continue
		}
		// Over the median when most of what came before lies under it.
		before, under := m.env[i-ms(hitFromMs):i-ms(hitToMs)], 0
		for _, x := range before {
			if hitRatio*x < m.env[i] {
				under++
			}
		}
		if 2*under > len(before) {
			hits++
			rest = ms(hitRestMs)
		}
	}
	if float64(free) < leastHits*float64(n) {
		return 0, whyHitsBusy
	}
	return hits, ""
}

// maskHits marks the steps in which known events ring. seq is the first step's sample position.
func (m *Measurer) maskHits(c *throwCtx, s spot, seq float64, step int) {
	mark := func(lo, hi float64) { // sample positions
		i, j := int(math.Floor((lo-seq)/float64(step))), int(math.Ceil((hi-seq)/float64(step)))
		for i = max(i, 0); i < min(j, len(m.busy)); i++ {
			m.busy[i] = true
		}
	}
	period := c.th.T1 - c.th.T0
	perMs := c.th.Vib[0].Rate / 1000
	for e := range c.w.Ends {
		for k := range c.w.Ends[e].W {
			w := &c.w.Ends[e].W[k]
			if (spot{e, window.Event(k)}) == s || math.IsNaN(w.Lo) {
				continue
			}
			lo, hi := c.th.SampleAt(w.Lo), c.th.SampleAt(w.Hi)+energyMs*perMs
			for d := -1.0; d <= 1; d++ {
				mark(lo+d*period, hi+d*period)
			}
		}
	}
	for u := range m.ctx {
		if u == c.i || m.ctx[u].th == nil {
			continue
		}
		for e := range m.ctx[u].heard {
			for k := range m.ctx[u].heard[e] {
				o := &m.ctx[u].heard[e][k]
				if o.why != "" || math.IsNaN(o.onset) {
					continue
				}
				for d := -1.0; d <= 1; d++ {
					mark(o.onset+d*period-foreignMs*perMs/4, o.onset+d*period+(crossLateMs+foreignMs)*perMs)
				}
			}
		}
	}
}
