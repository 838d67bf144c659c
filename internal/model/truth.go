package model

import (
	"math"

	"lapwing/internal/crank"
)

// Truth is what really happened at one end in one turn: from one head-end dead centre of its throw (0°) to the next.
// Closings that belong to the dead centre at 360° (head-end discharge, crank-end suction) are those of the cycle that
// ends there, so their angle may lie up to 540°.
type Truth struct {
	Throw int   // index in skid.Throws
	End   int   // crank.HE or crank.CE
	Rev   int64 // dead centres of this throw passed before, from 0

	T0, T1 float64 // s from the first sample to the head-end dead centres at 0° and 360°
	RPM    float64 // mean speed between them
	Step   int     // load step in force when the turn closed
	Idle   bool    // the suction valves were held open

	Suction, Discharge Events // NaN where an event did not happen

	// Masses over the turn, kg.
	Taken     float64 // net through the suction group into the end, leaks with it
	Delivered float64 // net through the discharge group out of the end, leaks with it
	Leaked    Leaks
	Stored    float64 // gain of the gas in the end

	Work   float64        // J, ∮ p dV over the turn as work done on the gas (positive for a compressor)
	Power  float64        // W, Work times mean speed
	Ps, Pd float64        // Pa, pressure in the passages behind the valves, weighted by the flow; NaN without flow
	Pin    crank.Reversal // of the combined load at the throw's crosshead pin

	Impacts []Impact // all impacts above 0.1 m/s, in order
}

// Leaks are masses lost through each path in a turn, kg, positive in the sense of the loss: out of the end through closed suction
// plates, into it through closed discharge plates, out of it past rings (net) and packing.
type Leaks struct {
	Suction, Discharge, Rings, Packing float64
}

// Events are one valve group's opening and closing.
type Events struct {
	Open, Close Event
}

// Event is one opening or closing of a group, degrees after the turn's head-end dead centre and seconds from the first sample.
type Event struct {
	Lift, LiftTime float64 // mean lift of the group crosses 10 %: first crossing up, or last one down
	// Impact is that of the first plate to hit its stop (opening), or the hardest hit on a seat since its plate was last
	// open by more than 30 % (closing): a plate that flutters shut and opens again has not closed.
	Impact, ImpactTime float64
	Speed              float64 // m/s of that impact
}

// Impact is one plate hitting stop or seat.
type Impact struct {
	Valve string
	Stop  bool
	Deg   float64 // after the head-end dead centre of the turn
	Time  float64 // s
	Speed float64 // m/s
}

func noEvent() Event {
	n := math.NaN()
	return Event{n, n, n, n, n}
}

// book is a Truth being written, with the sums behind its means.
type book struct {
	Truth
	flowS, flowD, psSum, pdSum float64
	m0                         float64
	last                       [2][]Event // of suction and discharge, by plate: its closing so far
	closed                     bool       // the turn itself is over; late closings may still come
}

// diary keeps the books of one end: that of the turn that runs, and those waiting for their last closings.
type diary struct {
	throw, end int
	open       []*book
	cur        *book // nil before the first dead centre
}

func (d *diary) begin(rev int64, t, mass float64) {
	b := &book{m0: mass}
	b.Throw, b.End, b.Rev, b.T0 = d.throw, d.end, rev, t
	b.Suction = Events{noEvent(), noEvent()}
	b.Discharge = Events{noEvent(), noEvent()}
	d.open = append(d.open, b)
	d.cur = b
}

func (d *diary) finish(t, mass float64, idle bool, step int, pin crank.Reversal) {
	b := d.cur
	if b == nil {
		return
	}
	b.closed = true
	b.T1, b.Idle, b.Step, b.Pin = t, idle, step, pin
	b.Stored = mass - b.m0
	b.RPM = 60 / (b.T1 - b.T0)
	b.Power = b.Work / (b.T1 - b.T0)
	b.Ps, b.Pd = math.NaN(), math.NaN()
	if b.flowS > 0 {
		b.Ps = b.psSum / b.flowS
	}
	if b.flowD > 0 {
		b.Pd = b.pdSum / b.flowD
	}
}

// give hands out the books whose last closing angle has passed; deg is the throw's unwrapped angle.
func (d *diary) give(deg float64, out []Truth) []Truth {
	for len(d.open) > 0 && d.open[0].closed && deg >= float64(d.open[0].Rev)*360+540 {
		out = append(out, d.open[0].Truth)
		d.open = d.open[1:]
	}
	return out
}

// of finds the book an event belongs to, and the event's angle in it. nil: before the first turn.
func (d *diary) of(deg float64, discharge, closing bool) (*book, float64) {
	r := deg
	if closing && discharge == (d.end == crank.HE) {
		r -= 180
	}
	rev := int64(math.Floor(r / 360))
	for _, b := range d.open {
		if b.Rev == rev {
			return b, deg - float64(rev)*360
		}
	}
	return nil, 0
}

func (b *book) group(discharge bool) *Events {
	if discharge {
		return &b.Discharge
	}
	return &b.Suction
}
