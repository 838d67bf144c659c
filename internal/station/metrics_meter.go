package station

import (
	"maps"
	"sync/atomic"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/tape"
)

// meter is what the compute goroutine measures of itself: two readings of the clock for a block and one for a turn, and
// once in a second of samples a picture for whoever scrapes. Nobody who looks makes it wait.
type meter struct {
	queue atomic.Pointer[<-chan *parcel]
	heard atomic.Int64 // Unix nanoseconds when the newest block was through; 0: none yet
	shown atomic.Pointer[measured]
	said  atomic.Int32 // category of the newest health

	// The compute goroutine's own.
	began    time.Time // before the first block
	busy     busy
	seconds  [60]second // of samples; what they hold counts up to now
	next     int        // the one being filled
	full     int        // how many others are
	before   second     // counts when the one being filled began
	disk     diskRate
	inKeep   time.Duration // within the block in hand
	inStates time.Duration
}

// busy is where the compute goroutine's time went since the start. Time in which it wanted to run and another process had
// the core is in it: that is what makes a line fall behind.
type busy struct{ line, keep, states time.Duration }

// second is one second of samples.
type second struct {
	samples               int64
	busy                  time.Duration
	queue                 int // most blocks that waited
	turns, valid, dropped int64
}

// minute sums up the seconds kept.
type minute struct {
	load, worst    float64 // share of the time that the samples took; of the slowest second. 0: nothing measured yet
	queue          int
	turns, invalid int64
	dropped        int64
}

// measured is one picture, never changed once it is in place.
type measured struct {
	rate     float64 // samples a second
	count    Count
	phase    frame.Status
	duty     []duty.State // by throw
	busy     busy
	minute   minute
	states   int // kept
	stateLen int // bytes
	stateAt  time.Time
	stateDur time.Duration
	known    bool // process values
	age      time.Duration
	judging  bool
	baseline uint64
	created  time.Time
	left     int   // steady turns to learn
	unsaid   int   // journal entries not on disk
	position int64 // sample number after the newest
}

// watch lets the meter see how many blocks wait.
func (m *meter) watch(queue chan *parcel) {
	var q <-chan *parcel = queue
	m.queue.Store(&q)
}

// kept runs f, which books and shows, and counts its time apart from that of the line.
func (m *meter) kept(f func() error) error {
	began := time.Now()
	err := f()
	m.inKeep += time.Since(began)
	return err
}

// measured books a block that is through, and takes a picture when a second of samples is full.
func (s *Station) measured(samples int, took time.Duration, h *held) {
	m := &s.meter
	m.heard.Store(time.Now().UnixNano())
	m.busy.line += took - m.inKeep - m.inStates
	m.busy.keep += m.inKeep
	m.busy.states += m.inStates
	m.inKeep, m.inStates = 0, 0
	cur := &m.seconds[m.next]
	cur.samples += int64(samples)
	cur.busy += took
	if q := m.queue.Load(); q != nil {
		cur.queue = max(cur.queue, len(*q))
	}
	if float64(cur.samples) < s.info.Rate {
		return
	}
	c := s.line.Count()
	now := second{turns: c.Turns, valid: c.Turns - c.Invalid, dropped: s.dropped.Load()}
	cur.turns, cur.valid, cur.dropped = now.turns-m.before.turns, now.valid-m.before.valid, now.dropped-m.before.dropped
	m.before = now
	m.next = (m.next + 1) % len(m.seconds)
	m.full = min(m.full+1, len(m.seconds)-1)
	m.seconds[m.next] = second{}
	s.showMeasured(h)
}

// showMeasured takes a picture for whoever scrapes. Compute goroutine.
func (s *Station) showMeasured(h *held) {
	m, c := &s.meter, s.line.Count()
	c.Reasons = maps.Clone(c.Reasons)
	p := &measured{rate: s.info.Rate, count: c, phase: s.line.Phase(), busy: m.busy, minute: m.lately(s.info.Rate),
		judging: s.line.Judging(), unsaid: len(s.unsaid), position: s.end}
	for i := range s.line.points {
		p.duty = append(p.duty, s.line.points[i].State)
	}
	if k := s.states.kept; len(k) > 0 {
		p.states, p.stateAt, p.stateDur = len(k), s.line.utc(float64(k[len(k)-1].seq)/s.info.Rate), s.states.last
		for i := range k {
			p.stateLen += len(k[i].data)
		}
	}
	proc := h.at(float64(s.end-1) / s.info.Rate)
	p.known, p.age = proc.Known, proc.Age
	if b := s.line.base; b != nil {
		p.baseline, p.created = s.learning.inForce, b.Created
	}
	if have, want := s.line.Learnt(); want > 0 {
		p.left = want - have
	}
	m.shown.Store(p)
}

// lately sums up the last minute of samples, whole seconds only.
func (m *meter) lately(rate float64) (out minute) {
	var samples int64
	var all time.Duration
	for i := range m.full {
		x := &m.seconds[(m.next+len(m.seconds)-1-i)%len(m.seconds)]
		samples += x.samples
		all += x.busy
		out.worst = max(out.worst, x.busy.Seconds()*rate/float64(x.samples))
		out.queue = max(out.queue, x.queue)
		out.turns += x.turns
		out.invalid += x.turns - x.valid
		out.dropped += x.dropped
	}
	if samples > 0 {
		out.load = all.Seconds() * rate / float64(samples)
	}
	return out
}

// diskRate is how fast the tape writes.
type diskRate struct {
	at      time.Time
	written int64
	rate    float64 // bytes a second
	known   bool
}

// diskEvery is the stretch that a rate is taken over: several commits of the tape.
const diskEvery = 10 * time.Second

func (d *diskRate) see(st *tape.Stats, now time.Time) (bytesPerSecond float64, known bool) {
	switch dt := now.Sub(d.at); {
	case d.at.IsZero():
		d.at, d.written = now, st.WrittenBytes
	case dt >= diskEvery:
		d.rate, d.known = float64(st.WrittenBytes-d.written)/dt.Seconds(), true
		d.at, d.written = now, st.WrittenBytes
	}
	return d.rate, d.known
}

// notYetOnDisk is how much of what has come the tape has not committed: what a power cut would take. ok is false where the
// tape has written nothing of this run.
func notYetOnDisk(st *tape.Stats, position int64, rate float64) (d time.Duration, ok bool) {
	if st.Down != nil || st.KeptBytes == 0 || st.Segments == 0 || position < st.NewestSeq {
		return 0, false
	}
	return time.Duration(float64(position-st.NewestSeq) / rate * 1e9), true
}
