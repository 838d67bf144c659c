package frame

import (
	"fmt"
	"math"

	"lapwing/internal/acq"
)

// Assembler cuts blocks into frames. It is used by one goroutine.
type Assembler struct {
	cfg   Config
	ring  ring
	holes spans // lost samples, filled with the code before them
	clips spans // overloads the source reported
	ref   reference

	begun  bool
	began  int64 // sample number of the first sample, or of the first after a long loss
	next   int64 // next sample for the detector; it runs one behind the newest
	turn   int64 // number of the next frame
	frames int64
	letGo  int64
	given  int64 // samples before this are told: in a frame or let go

	pool []*Frame
	used int
}

// New checks the configuration, filling in defaults; the error names all that is wrong with it.
func New(cfg Config) (*Assembler, error) {
	cfg, err := cfg.withDefaults()
	if err != nil {
		return nil, err
	}
	a := &Assembler{cfg: cfg, turn: cfg.FirstTurn}
	a.ring.buf = make([][]int32, cfg.Inputs)
	switch {
	case a.cfg.Wheel.Separate:
		a.ref = newApart(&a.cfg, &a.ring, &a.holes)
	case a.cfg.Wheel.Teeth > 0:
		a.ref = newCog(&a.cfg, &a.ring, &a.holes)
	default:
		a.ref = newOneMark(&a.cfg, &a.ring, &a.holes)
	}
	return a, nil
}

// Add takes the next block and calls emit for every revolution that it completes, in order; none is usual. A Frame
// and everything in it is valid until the next Add or Flush; the block is not held.
//
// Where samples are missing (up to two turns of them; one of the shortest turns before the speed is known) they are
// filled with the code before them, and the frame is marked Gap; its marks are sound. After a longer loss the open turn
// is let go and the speed must be established anew. The error is for a block that does not fit the configuration or goes back in time; nothing of it
// is taken then.
func (a *Assembler) Add(b *acq.Block, emit func(*Frame)) error {
	if len(b.Counts) != a.cfg.Inputs {
		return fmt.Errorf("frame: block at sample %d has %d inputs, want %d", b.Seq0, len(b.Counts), a.cfg.Inputs)
	}
	for i, x := range b.Counts {
		if len(x) != b.N {
			return fmt.Errorf("frame: block at sample %d: input %d has %d samples, N is %d", b.Seq0, i, len(x), b.N)
		}
	}
	if a.begun && b.Seq0 < a.ring.end() {
		return fmt.Errorf("frame: block at sample %d goes back, %d was next", b.Seq0, a.ring.end())
	}
	a.used = 0
	if b.N == 0 {
		return nil // a loss without samples shows in the next block's number
	}
	switch {
	case !a.begun:
		a.begin(b.Seq0)
	case b.Seq0 > a.ring.end():
		a.lose(b.Seq0-a.ring.end(), emit)
	}
	need := a.needed()
	a.holes.forget(need)
	a.clips.forget(need)
	a.ring.room(b.N, need)
	a.ring.take(b)
	if b.Clip {
		a.clips.add(b.Seq0, b.Seq0+int64(b.N))
	}
	a.run(a.ring.end()-1, emit)
	return nil
}

// Flush ends the stream: it emits the turn whose closing mark had come but was not yet sure. The next Add begins anew.
func (a *Assembler) Flush(emit func(*Frame)) {
	a.used = 0
	if !a.begun {
		return
	}
	a.drain(emit)
	a.ref.stop()
	a.tell(a.ring.end())
	a.begun = false
}

func (a *Assembler) begin(seq int64) {
	a.begun, a.began, a.next, a.given = true, seq, seq, seq
	a.holes, a.clips = a.holes[:0], a.clips[:0]
	a.ring.reset(seq)
	a.ref.restart()
}

// lose deals with n lost samples.
func (a *Assembler) lose(n int64, emit func(*Frame)) {
	end := a.ring.end()
	st := a.ref.state()
	short := st.minT
	if st.locked {
		short = min(2*st.expect, st.keep/2)
	}
	if float64(n) <= short {
		a.ring.room(int(n), a.needed())
		a.ring.hold(int(n))
		a.holes.add(end, end+n)
		a.run(a.ring.end()-1, emit)
		return
	}
	if st.locked && !st.counts {
		a.turn += int64(math.Round(float64(n) / st.expect)) // they went by unseen
	}
	a.drain(emit)
	a.ref.stop()
	a.tell(end)
	a.begin(end + n)
}

// run shows the detector all samples before end.
func (a *Assembler) run(end int64, emit func(*Frame)) {
	for ; a.next < end; a.next++ {
		if a.ref.sample(a.next) {
			a.give(emit)
		}
	}
	a.tell(a.needed())
}

// drain decides what is pending, at the end of a stretch of samples.
func (a *Assembler) drain(emit func(*Frame)) {
	a.run(a.ring.end(), emit)
	a.ref.finish()
	a.give(emit)
}

func (a *Assembler) give(emit func(*Frame)) {
	for {
		c, ok := a.ref.next()
		if !ok {
			return
		}
		a.emit(c, emit)
	}
}

// tell counts samples up to seq that are in no frame.
func (a *Assembler) tell(seq int64) {
	if seq > a.given {
		a.letGo += seq - a.given
		a.given = seq
	}
}

// needed gives the oldest sample that must stay.
func (a *Assembler) needed() int64 { return a.ref.needs(a.next) }

func (a *Assembler) emit(c cut, emit func(*Frame)) {
	if a.used == len(a.pool) {
		a.pool = append(a.pool, &Frame{Counts: make([][]int32, a.cfg.Inputs)})
	}
	f := a.pool[a.used]
	a.used++
	from, to := int64(math.Floor(c.a.pos)), int64(math.Ceil(c.b.pos))
	q := c.q
	if a.holes.meet(from, to) {
		q |= Gap
	}
	if a.clips.meet(from, to) {
		q |= Clipped
	}
	a.holes.forget(to - 1)
	a.clips.forget(to - 1)
	i, j := from-a.ring.first, to-a.ring.first
	for n, x := range a.ring.buf {
		f.Counts[n] = x[i:j:j]
	}
	f.Inner = append(f.Inner[:0], c.inner...)
	a.turn += c.skip
	f.Turn, f.Seq0, f.Mark0, f.Mark1, f.Q = a.turn, from, c.a.pos, c.b.pos, q
	a.turn += int64(c.k)
	a.frames++
	a.tell(from)
	a.given = max(a.given, to)
	emit(f)
}
