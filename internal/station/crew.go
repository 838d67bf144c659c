package station

import (
	"runtime"
	"sync"
)

// crew spreads the pure middle's work over the cores: the pieces of one turn, by channel or by throw. The middle itself
// has no goroutine and knows nothing of it; it is called back from several, each time for another piece.
type crew struct {
	mu            sync.Mutex
	wake, ready   sync.Cond // there is work; all of it has come back
	f             func(i int)
	n, next, left int // pieces; the next to take; those not come back
	closed        bool
	hands         sync.WaitGroup
}

// crewMost is how many goroutines share a turn at most: beyond that the pieces are too few.
const crewMost = 4

// newCrew starts a goroutine for every core but the caller's; nil where there is one core only.
func newCrew() *crew { return crewOf(min(runtime.GOMAXPROCS(0), crewMost)) }

func crewOf(n int) *crew {
	if n < 2 {
		return nil
	}
	c := new(crew)
	c.wake.L, c.ready.L = &c.mu, &c.mu
	for range n - 1 {
		c.hands.Go(c.help)
	}
	return c
}

// do calls f with 0 to n-1, here and in the crew's goroutines, and returns when all calls have. It is for one caller.
func (c *crew) do(n int, f func(i int)) {
	c.mu.Lock() // no defer: f may panic with the lock let go
	c.f, c.n, c.next, c.left = f, n, 0, n
	if n > 1 {
		c.wake.Broadcast()
	}
	for c.next < c.n {
		c.piece()
	}
	for c.left > 0 {
		c.ready.Wait()
	}
	c.f, c.n = nil, 0
	c.mu.Unlock()
}

// piece takes one and does it, with the lock let go meanwhile.
func (c *crew) piece() {
	i, f := c.next, c.f
	c.next++
	c.mu.Unlock()
	f(i)
	c.mu.Lock()
	if c.left--; c.left == 0 {
		c.ready.Signal()
	}
}

func (c *crew) help() {
	c.mu.Lock()
	for !c.closed {
		if c.next < c.n {
			c.piece()
		} else {
			c.wake.Wait()
		}
	}
	c.mu.Unlock()
}

// close ends the goroutines; nil is at rest already.
func (c *crew) close() {
	if c == nil {
		return
	}
	c.mu.Lock()
	c.closed = true
	c.mu.Unlock()
	c.wake.Broadcast()
	c.hands.Wait()
}
