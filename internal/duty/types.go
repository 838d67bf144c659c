package duty

// State says what the machine is doing as far as judging it goes.
type State uint8

// The duty states. Unknown never counts as steady.
const (
	Unknown    State = iota
	Stopped          // no turns
	Starting         // first turns after a stop or after nothing was known, and below the stated speeds on the way up
	Changing         // speed, pressure or load step moving faster than a fair comparison allows
	Steady           // compared with the baseline
	Unloaded         // no end of the throw does work: its suction valves are held open
	OutOfRange       // speed outside the stated range, though the machine had been started
)

// Point is the duty of one turn as seen by one throw: what it is asked to do.
type Point struct {
	State    State
	Step     int // load-step code; inferred from the traces (idle ends) when the process values do not give it
	RPM      float64
	Ps, Pd   float64 // Pa, line pressures of the throw's stage (own plateau when the process does not give them)
	Inferred bool    // true when process values were missing or stale

	// The same duty as the traces alone show it: what a baseline falls back on when the process values go.
	OwnStep      int
	OwnPs, OwnPd float64 // Pa, own plateaus; NaN unknown
}

// Deviation is one feature of one turn or block against its baseline. Residuals are in the feature's SI unit.
type Deviation struct {
	Feature  int     // index in the layout
	Value    float64 // as measured (block: median)
	Expected float64 // for this duty
	Residual float64 // Value − Expected (block: median of the turns' residuals)
	Spread   float64 // robust standard deviation of such a residual when healthy (turn or block, as the case is), with a floor for the duty model's own error
	Z        float64 // Residual/Spread
	N        int     // turns behind it
	Seen     bool    // the baseline has seen this duty; when false Z must not be used
	Drift    float64 // blocks only: two-sided CUSUM of Z over settled blocks as a share of its decision limit, signed; beyond ±1 is a slow change
}

// Block is the evidence of one throw over a stretch of turns at seen duty.
type Block struct {
	Throw        int
	Turn0, Turn1 int64 // first and last turn
	Seq0, Seq1   int64 // raw sample range
	Time         float64
	Point        Point       // median duty
	Settled      bool        // every turn was steady
	Dev          []Deviation // the throw's features that have enough valid turns, in layout order
}
