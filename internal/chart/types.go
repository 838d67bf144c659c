package chart

import "time"

// Cylinder is what the charts show of one throw in one turn. All slices of a cylinder have one length and lie on one
// angle grid: point i at Lo + i·Step degrees after the head-end dead centre. SI units; NaN is not drawn.
type Cylinder struct {
	Name     string // t1
	About    string // which turn, when, at what speed and load step: the lines under the title
	Lo, Step float64
	Ends     [2]*End // crank.HE, crank.CE; nil where there is nothing to show
	Vib      []Vib
	Load     *Load // nil when not known
	AngleU   float64
}

// End is one working end.
type End struct {
	P, V           []float64 // Pa absolute, m³
	LinePs, LinePd float64   // Pa absolute, line pressures; NaN unknown
	Strokes        [2]Stroke // compression, expansion
	Events         []Event   // those that have a window or an angle
	State          string    // following, holding …
}

// Stroke is a closed stroke with its fitted line ln p = const − N·ln V.
type Stroke struct {
	From, To int // grid points, half open; equal when there is none
	N        float64
}

// Event is a valve event with its window, degrees.
type Event struct {
	Suction, Opens  bool
	Angle, Expected float64 // NaN unknown
	Lo, Hi          float64 // NaN no window
	Sure            bool    // found on this turn; else it was moved by the model
	Shared          bool
}

// Vib is one accelerometer over angle.
type Vib struct {
	Channel string
	Peak    []float64 // m/s²
}

// Load is the rod load over angle, N, compression positive.
type Load struct {
	Gas, Pin      []float64
	RatedPush     float64 // N, the machine's limits; 0 not stated
	RatedPull     float64
	ReversalDeg   float64
	ReversalShare float64
}

// Picture is what one chart of a cylinder is made of: the turn looked at first, others over it, and a reference.
type Picture struct {
	Turns     []Cylinder
	Reference *Cylinder
}

// Trend is one measure over time.
type Trend struct {
	Title, About, Unit string
	Points             []TrendPoint // in order of time
	Marks              []TrendMark
}

// TrendPoint is a value with what was expected at that duty; NaN: not known, a gap.
type TrendPoint struct {
	At                      time.Time
	Value, Expected, Spread float64
}

// TrendMark is an alarm on the time axis.
type TrendMark struct {
	At       time.Time
	Text     string
	Severity int // 1 advisory, 2 alert, 3 danger
}

// Spectrum is a one-sided density over frequency.
type Spectrum struct {
	Title, About, Unit string // Unit of the density, people's: g²/Hz
	Hz, Density        []float64
	Bands              [][2]float64 // Hz, bands in use
}

// Area is where a panel lies on the drawing, in fractions of its width and height from the upper left, and what its
// axes run over in the units that are written on them.
type Area struct {
	Name string     `json:"name"`
	Box  [4]float64 `json:"box"` // left, top, right, bottom
	X    [2]float64 `json:"x"`
	Y    [2]float64 `json:"y"`
	Log  bool       `json:"log,omitempty"` // both axes are logarithmic
}
