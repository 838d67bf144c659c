package turn

// history is a channel's recent values. The oldest go by moving its beginning; memory is moved only when the end is
// reached, so that a value is copied about once in two turns however often the oldest are dropped.
type history struct {
	buf  []float64
	from int // what lies before is forgotten
}

// roomFor is how many times what is held there is memory for, when it is taken.
const roomFor = 3

// live gives the values held.
func (h *history) live() []float64 { return h.buf[h.from:] }

// more adds n values, to be filled in by the caller, and gives them.
func (h *history) more(n int) []float64 {
	if len(h.buf)+n > cap(h.buf) {
		live := h.live()
		to := h.buf[:0]
		if 2*(len(live)+n) > cap(h.buf) {
			to = make([]float64, 0, roomFor*(len(live)+n))
		}
		h.buf, h.from = append(to, live...), 0
	}
	old := len(h.buf)
	h.buf = h.buf[:old+n]
	return h.buf[old:]
}

func (h *history) drop(n int) { h.from += n }

func (h *history) reset() { h.buf, h.from = h.buf[:0], 0 }
