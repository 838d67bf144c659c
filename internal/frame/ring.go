package frame

import "lapwing/internal/acq"

// ring holds the newest samples of all inputs, contiguous per input so that frames can be views of it.
type ring struct {
	buf   [][]int32
	first int64 // sample number of buf[i][0]
	tight bool  // let go of everything at once (tests)
}

func (r *ring) reset(first int64) {
	for i := range r.buf {
		r.buf[i] = nil // frames given out may still look at the old memory
	}
	r.first = first
}

func (r *ring) end() int64 { return r.first + int64(len(r.buf[0])) }

// room makes place for n more samples; those before keep may go. It moves memory only when it must, so that the cost
// per sample does not depend on the block length.
func (r *ring) room(n int, keep int64) {
	have := len(r.buf[0])
	if !r.tight && have+n <= cap(r.buf[0]) {
		return
	}
	drop := int(min(max(keep-r.first, 0), int64(have)))
	live := have - drop
	grow := 3 * (live + n) // what is held is then moved once in two frames
	for i, x := range r.buf {
		if grow > cap(x) {
			y := make([]int32, live, grow)
			copy(y, x[drop:])
			r.buf[i] = y
		} else {
			copy(x, x[drop:])
			r.buf[i] = x[:live]
		}
	}
	r.first += int64(drop)
}

// code gives input n at sample j after the median of three.
func (r *ring) code(n int, j int64) int32 {
	x, i := r.buf[n], j-r.first
	if i == 0 || i+1 >= int64(len(x)) {
		return x[i]
	}
	a, b, c := x[i-1], x[i], x[i+1]
	return max(min(a, b), min(max(a, b), c))
}

func (r *ring) take(b *acq.Block) {
	for i, x := range b.Counts {
		r.buf[i] = append(r.buf[i], x...)
	}
}

// hold repeats the last codes n times, for samples that were lost.
func (r *ring) hold(n int) {
	for i, x := range r.buf {
		v := x[len(x)-1]
		for range n {
			x = append(x, v)
		}
		r.buf[i] = x
	}
}

// span is a stretch of sample numbers, half open.
type span struct{ from, to int64 }

// spans are stretches in order; neighbours and overlaps are merged, and the oldest are forgotten.
type spans []span

const maxSpans = 64

func (s *spans) add(from, to int64) {
	if n := len(*s); n > 0 && from <= (*s)[n-1].to {
		(*s)[n-1].to = max(to, (*s)[n-1].to)
		return
	}
	if len(*s) == maxSpans { // rather one stretch too long than one forgotten
		(*s)[maxSpans-1].to = to
		return
	}
	*s = append(*s, span{from, to})
}

// meet reports whether any stretch reaches into [from, to).
func (s spans) meet(from, to int64) bool {
	for _, x := range s {
		if x.from < to && x.to > from {
			return true
		}
	}
	return false
}

// forget drops stretches that end before seq.
func (s *spans) forget(seq int64) {
	n := 0
	for n < len(*s) && (*s)[n].to <= seq {
		n++
	}
	if n > 0 {
		*s = append((*s)[:0], (*s)[n:]...)
	}
}
