package ripple

import (
	"math/cmplx"

	"lapwing/internal/dsp"
	"lapwing/internal/turn"
)

const (
	memory    = 8     // turns whose median a computed ripple is
	deadband  = 0.002 // degrees by which the median must move before the angle map follows: saves work, costs nothing
	computedU = 0.3   // degrees, 95 % half-width left by a computed ripple when the inertia is within 15 % (windows.md section 1)
)

// Config says what is known beforehand.
type Config struct {
	At     func(step int) []turn.Ripple // as measured, at a load step; nil where nobody has measured it
	U      float64                      // degrees, the uncertainty stated for it; 0: by number of marks
	Torque *Torque                      // nil: nothing is computed
}

// Book holds the ripple in force at each load step. Measured ripple goes before computed one.
type Book struct {
	cfg   Config
	steps map[int]*computed
	now   *computed // what the newest answer was taken from; nil: a measured ripple, or none
	why   string    // why nothing could be computed of the newest turns …
	mute  int       // … so many in a row
}

// computed is the ripple of one load step as its own turns gave it.
type computed struct {
	last  [memory]Harmonics
	n     int // turns seen
	inUse Harmonics
	list  []turn.Ripple // inUse as turn takes it; empty until the first turn
}

// NewBook gives a book without computed ripple.
func NewBook(cfg Config) *Book { return &Book{cfg: cfg, steps: map[int]*computed{}} }

// For gives what is in force for the next turn at a load step; it is meant to be turn.Marks.Shaft's answer.
func (b *Book) For(step int) turn.Shaft {
	b.now = nil
	if given := b.cfg.At(step); given != nil {
		return turn.Shaft{Ripple: given, U: b.cfg.U}
	}
	if b.cfg.Torque == nil {
		return turn.Shaft{U: b.cfg.U}
	}
	c := b.steps[step]
	if c == nil {
		c = new(computed)
		b.steps[step] = c
	}
	b.now = c
	if len(c.list) == 0 {
		return turn.Shaft{U: b.cfg.U}
	}
	return turn.Shaft{Ripple: c.list, U: computedU}
}

// Learn takes the turn for which the newest answer was given, before anybody uses it. Its own pressures say how far the
// ripple in force was off. Where that is more than the stated uncertainty the load is moving, perhaps within the turn,
// and the angles are as uncertain as if the ripple were ignored; so they are before the first ripple is known. The turn
// then says so, also when its pressures cannot tell. They count for later turns at that load step, by the median of the last eight. ps is as for
// Torque.Of. It gives why nothing could be computed, or "".
func (b *Book) Learn(t *turn.Turn, ps []float64) (why string) {
	c := b.now
	if c == nil {
		return ""
	}
	defer func() {
		if b.why = why; why == "" {
			b.mute = 0
		} else {
			b.mute++
		}
	}()
	h, why := b.cfg.Torque.Of(t, ps)
	if why != "" { // what is in force may be long out of date, and nothing tells
		if len(c.list) > 0 {
			widen(t, max(c.inUse.Apart(Harmonics{}), turn.Uncertainty(1, false)))
		}
		return why
	}
	u := h.Apart(Harmonics{}) // what ignoring it may cost
	if len(c.list) > 0 {
		off := h.Apart(c.inUse)
		if u = max(u, c.inUse.Apart(Harmonics{})) + off; off <= computedU { // a change within the turn shows in part only
			u = 0
		}
	}
	widen(t, u)
	c.last[c.n%memory] = h
	c.n++
	m := c.median()
	if !m.possible() {
		c.list = c.list[:0]
		return whyInertia
	}
	if len(c.list) == 0 || m.Apart(c.inUse) > deadband {
		c.inUse, c.list = m, m.Ripple(c.list[:0])
	}
	return ""
}

func widen(t *turn.Turn, u float64) {
	for k := range t.Throws {
		t.Throws[k].U = max(t.Throws[k].U, u)
	}
}

// median is taken of real and imaginary parts apart, so that one wild turn moves nothing.
func (c *computed) median() (m Harmonics) {
	var re, im [memory]float64
	n := min(c.n, memory)
	for o := range m {
		for i := range n {
			re[i], im[i] = real(c.last[i][o]), imag(c.last[i][o])
		}
		m[o] = complex(dsp.MedianInPlace(re[:n]), dsp.MedianInPlace(im[:n]))
	}
	return m
}

// mostSpeed is the sum of amplitudes that is still believed of a computed ripple: twice what compressors show. More
// means an inertia wrong by a factor, and that must not bend every angle.
const (
	mostSpeed  = 0.05
	whyInertia = "the torque is too strong for the stated inertia"
)

func (h Harmonics) possible() bool {
	sum := 0.0
	for _, z := range h {
		sum += cmplx.Abs(z)
	}
	return sum <= mostSpeed
}
