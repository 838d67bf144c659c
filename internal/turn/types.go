package turn

import "lapwing/internal/frame"

// PadDeg is how far a turn reaches beyond both of its dead centres, so that an event near a dead centre, and a
// crank-end cycle that begins in the turn before, are seen whole.
const PadDeg = 60

// Grid is the uniform angle grid of a turn: point i lies at Lo + i*Step degrees after the throw's head-end dead
// centre. Lo = -PadDeg, the last point lies at 360+PadDeg.
type Grid struct {
	Lo, Step float64 // degrees
	N        int
}

// At gives the angle of point i, in degrees.
func (g Grid) At(i int) float64 { return g.Lo + float64(i)*g.Step }

// Index gives the (fractional) grid position of an angle, in points.
func (g Grid) Index(deg float64) float64 { return (deg - g.Lo) / g.Step }

// Turn is one revolution of the machine in the angle domain. Who gets it from a Converter may read it until the next
// one is emitted (see Converter.Add).
type Turn struct {
	Number     int64   // the revolution's number (frame.Frame.Turn of the frame that holds the first throw's dead centre)
	Seq0, Seq1 int64   // raw sample range it was computed from (half open), padding included; the frame's own when not valid
	Time       float64 // s from the sample clock's zero to the first throw's head-end dead centre; to the opening mark when not valid
	RPM        float64 // mean speed over the first throw's revolution; between the marks when not valid, NaN when these are not one revolution apart
	Reason     string  // why the turn is not valid; empty when it is
	Throws     []Throw // in the order of the skid file; none when not valid

	Quality frame.Quality // of this and the neighbouring frames it leans on, together; of its own frame when not valid
}

// Valid reports whether windows and measures may be taken from the turn.
func (t *Turn) Valid() bool { return t.Reason == "" }

// Throw is one throw's revolution: from its own head-end dead centre to the next, padded by PadDeg on both sides.
type Throw struct {
	T0, T1 float64      // sample positions of the head-end dead centres at 0° and 360°
	RPM    float64      // mean speed between them
	U      float64      // uncertainty of the angle scale, degrees, 95 % half-width (see Uncertainty)
	Grid   Grid         // of all angle-domain slices below
	Pos    []float64    // sample position (fractional sample number) of every grid angle, strictly increasing
	Omega  []float64    // instantaneous shaft speed at every grid angle, rad/s
	P      [2][]float64 // Pa absolute; 0 head end, 1 crank end; nil where the end has no pressure channel
	Bad    [2]string    // why P must not be used; empty when sound
	Vib    []Vib        // one per accelerometer of the throw, in skid order
}

// SampleAt gives the sample position of an angle in degrees (linear between grid points; the grid is fine).
func (t *Throw) SampleAt(deg float64) float64 {
	x := t.Grid.Index(deg)
	if x <= 0 {
		return t.Pos[0] + x*(t.Pos[1]-t.Pos[0])
	}
	n := len(t.Pos) - 1
	if x >= float64(n) {
		return t.Pos[n] + (x-float64(n))*(t.Pos[n]-t.Pos[n-1])
	}
	i := int(x)
	return t.Pos[i] + (x-float64(i))*(t.Pos[i+1]-t.Pos[i])
}

// Vib is one accelerometer's share of a turn. X stays at the full sampling rate: ring-down knows no angle. The filters'
// delay is taken out of all of it, to the nearest sample.
type Vib struct {
	Channel string    // channel id of the skid file
	Rate    float64   // samples per second
	Seq0    int64     // sample at which X[0] happened
	Late    float64   // samples, -0.5..0.5: what is left of the filter's delay; an instant read off X is this much too late
	X       []float64 // m/s², causal band-pass (impact band), full rate, over the padded turn
	Leak    []float64 // (m/s²)² mean square per grid bin in the leak band (10-20 kHz), one per grid point; nil when the rate is too low for the band
	Peak    []float64 // m/s², largest |X| in the bin centred on each grid point
	RMS     []float64 // m/s², of X in the bin
	Suspect string    // why this channel must not be used; empty when sound
}
