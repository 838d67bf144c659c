package measure

import "lapwing/internal/window"

// Class is the kind of signal that a feature stands on. A finding's grade needs two of them.
type Class uint8

// The classes of evidence.
const (
	Pressure Class = iota
	Vibration
	Temperature
	Process
)

// Feature is one condensed number of a turn, with its place in the machine. A Layout is fixed for a skid.
type Feature struct {
	Subject string // t1 (throw), t1.he (end), t1.he.suction (valve group or leak path), t1.rings, t1.he.suction.opens (event)
	Name    string // with the unit people read: n_comp_late, p_suction_bar_abs, opens_deg, peak_g …
	What    string // one line for people
	Class   Class
	Throw   int
	End     int     // crank.HE, crank.CE; -1 for a throw as a whole
	Scale   float64 // what people read = value·Scale + Shift
	Shift   float64
	Display bool // for the eye only: no baseline is learnt of it
	Flat    bool // the duty has been taken out of it already: its baseline is one value a load step
}

// Layout lists the features of a skid in a fixed order. Vectors are aligned to it.
type Layout []Feature

// Find gives the index of a feature, -1 when there is none.
func (l Layout) Find(subject, name string) int {
	for i := range l {
		if l[i].Subject == subject && l[i].Name == name {
			return i
		}
	}
	return -1
}

// Vector holds one turn's features in SI units, aligned to a Layout.
type Vector struct {
	Turn       int64
	Seq0, Seq1 int64   // raw sample range of the turn
	Time       float64 // s of sample clock at the first throw's head-end dead centre
	RPM        float64
	V          []float64 // NaN where absent
	Why        []string  // reason where absent, "" where present

	Marks [][2][window.Events]Mark // by throw, end and event: what else may ring there; zero on a turn that is not valid
}
