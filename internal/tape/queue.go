package tape

import (
	"sync"

	"lapwing/internal/acq"
)

// item is one thing for the writer, in the order it came.
type item struct {
	block   *acq.Block // a copy
	process *ProcessRow
	mark    *Mark
	flush   chan error
}

// queue is the bounded buffer between the source and the disk. Nothing in it waits: a full queue drops its oldest block.
type queue struct {
	wake  chan struct{} // holds one token when there may be work
	limit int64         // samples per channel that may wait

	mu      sync.Mutex
	items   []item
	waiting int64
	closed  bool
	free    []*acq.Block
	blocks  uint64 // dropped
	samples int64  // dropped, per channel
}

func newQueue(limit int64) *queue {
	return &queue{wake: make(chan struct{}, 1), limit: limit}
}

// push puts a copy of b in; false when the queue is closed.
func (q *queue) push(b *acq.Block) bool {
	q.mu.Lock()
	if q.closed {
		q.mu.Unlock()
		return false
	}
	q.waiting += int64(b.N)
	for i := 0; i < len(q.items) && q.waiting > q.limit; {
		old := q.items[i].block
		if old == nil {
			i++
			continue
		}
		q.waiting -= int64(old.N)
		q.blocks++
		q.samples += int64(old.N)
		q.free = append(q.free, old)
		q.items = append(q.items[:i], q.items[i+1:]...)
	}
	q.items = append(q.items, item{block: copied(q.spare(), b)})
	q.mu.Unlock()
	q.nudge()
	return true
}

// put adds something that is never dropped; false when the queue is closed.
func (q *queue) put(it item) bool {
	q.mu.Lock()
	defer q.mu.Unlock()
	if q.closed {
		return false
	}
	q.items = append(q.items, it)
	q.nudge()
	return true
}

// next gives the oldest item only, so that the rest can still be dropped when the disk is slow.
func (q *queue) next() (it item, ok, closed bool) {
	q.mu.Lock()
	defer q.mu.Unlock()
	if len(q.items) == 0 {
		return item{}, false, q.closed
	}
	it = q.items[0]
	copy(q.items, q.items[1:])
	q.items[len(q.items)-1] = item{}
	q.items = q.items[:len(q.items)-1]
	if it.block != nil {
		q.waiting -= int64(it.block.N)
	}
	return it, true, q.closed
}

// recycle takes a block back that next gave.
func (q *queue) recycle(b *acq.Block) {
	q.mu.Lock()
	defer q.mu.Unlock()
	if len(q.free) < 64 {
		q.free = append(q.free, b)
	}
}

func (q *queue) close() {
	q.mu.Lock()
	q.closed = true
	q.mu.Unlock()
	q.nudge()
}

func (q *queue) nudge() {
	select {
	case q.wake <- struct{}{}:
	default:
	}
}

func (q *queue) spare() *acq.Block {
	if n := len(q.free); n > 0 {
		b := q.free[n-1]
		q.free = q.free[:n-1]
		return b
	}
	return new(acq.Block)
}

func copied(dst, b *acq.Block) *acq.Block {
	counts := dst.Counts
	*dst = *b
	dst.Counts = grown(counts, len(b.Counts))
	for c, x := range b.Counts {
		dst.Counts[c] = append(dst.Counts[c][:0], x...)
	}
	return dst
}
