package frame

import "math"

// most gives how many marks ahead an edge is looked for.
func (c *cog) most() int { return max(3, c.n/6) }

// misplaced looks at the open turn's edges anew: do they fit better a few teeth further on or back on the wheel? Or, when
// it holds many edges that are no teeth and none is where it should be, at another speed?
func (c *cog) misplaced(period float64) bool {
	from := len(c.past)
	for from > 0 && c.past[from-1].pos >= c.mark0 {
		from--
	}
	edges := c.past[from:]
	if len(edges) < c.n/2 {
		return false
	}
	pitch := period / c.at[c.n]
	if c.crowded() {
		natural := c.pitch(edges)
		for m := range c.n {
			if r := c.try.try(c.at, m, edges, natural, unsureScat, float64(c.nStray)/8, 4); r.cost < float64(c.nStray)/8 {
				return true
			}
		}
		return false
	}
	first := 0
	for first < c.n && c.at[first]+0.5 < (edges[0].pos-c.mark0)/pitch {
		first++
	}
	here := c.try.try(c.at, first%c.n, edges, pitch, c.f.scat, math.Inf(1), 4)
	for by := -mostSlipped; by <= mostSlipped; by++ {
		if m := (first + by + c.n) % c.n; by != 0 && m >= 0 {
			if r := c.try.try(c.at, m, edges, pitch, c.f.scat, here.cost, 4); r.cost < here.cost-0.5 {
				return true
			}
		}
	}
	return false
}

// crowded: the wheel may turn at twice the speed that it is followed at. An amplifier's fault can also double the edges,
// but then the teeth are where they should be.
func (c *cog) crowded() bool { return c.nStray > c.n/3 && c.f.scat > 0.05 }

// pitch gives the distance of teeth at the beginning of a run of edges.
func (c *cog) pitch(edges []pulse) float64 {
	var d [9]float64
	n := min(len(d), len(edges)-1)
	for i := range n {
		d[i] = edges[i+1].pos - edges[i].pos
	}
	return medianOf(d[:n])
}

// searching looks whether the newest edges, a turn of them and more, show the wheel; if so they are gone through again
// from their beginning, so that no turn is lost that they hold.
func (c *cog) searching() {
	c.sought = c.lastPulse
	n := len(c.past)
	if n < c.n+6 || c.sane < 4 {
		return
	}
	for _, w := range [...]int{c.n + 8, n} {
		if w > n {
			continue
		}
		edges := c.past[n-w:]
		pitch := c.pitch(edges)
		fit, ok := c.try.align(c.at, edges, pitch, c.most())
		if !ok {
			continue
		}
		c.locked, c.lost = true, false
		c.starting = !(c.expect > 0 && edges[0].pos-c.lastEnd < mostUnseen*c.expect)
		c.f.begin(c.at, fit.mark, edges[0].pos, pitch)
		clear(c.bias)
		c.swings.forget()
		c.f.bias = c.bias
		c.open, c.hasCand, c.misfits, c.q = false, false, 0, 0
		if fit.mark == 0 {
			c.begin(edges[0].pos)
		}
		c.replaying = true
		for _, p := range edges[1:] {
			if c.running(p); !c.locked {
				break
			}
		}
		c.replaying = false
		if c.locked {
			c.setDue()
			return
		}
		c.sane = 0 // not at once again
		return
	}
}
