package frame

// coast tells from the periods whether the shaft runs down: for at least six turns each has been slower than the one
// before it, and they have lost more than a twentieth of the speed in all. It ends with the first turn that is not
// slower: the driver has taken the load again. A driver that slows down on command looks the same.
type coast struct {
	last, fastest float64 // periods
	turns         int     // each slower than the one before
}

const (
	coastTurns = 6
	coastFall  = 0.05
	ebbFall    = 0.04
	coastStep  = 0.001 // of the period: the least by which a turn is slower
)

func (c *coast) push(period float64) {
	if c.last > 0 && period > c.last*(1+coastStep) {
		c.turns++
	} else {
		c.turns, c.fastest = 0, period
	}
	c.last = period
}

func (c *coast) reset() { *c = coast{} }

// ebbing is an earlier sign of it, good enough to doubt a mark that seems to be missing: two turns, a twenty-fifth slower.
func (c *coast) ebbing() bool { return c.turns >= 2 && c.last > c.fastest*(1+ebbFall) }

func (c *coast) coasting() bool {
	return c.turns >= coastTurns && c.last > c.fastest*(1+coastFall)
}
