package window

// Event is one of the four valve events of a cylinder end in a turn.
type Event int

// The events, in the order of a cycle that starts with expansion.
const (
	DischargeCloses Event = iota
	SuctionOpens
	SuctionCloses
	DischargeOpens
	Events = 4
)

// State says how an end's windows were found this turn. The zero value never reads as healthy.
type State uint8

// The states of DESIGN.md.
const (
	Lost          State = iota // too long without a believable event: no window
	Following                  // found on this turn and plausible
	Holding                    // not found for a few turns: moved by the model, low confidence
	Idle                       // the end does no work: valves held open, machine stopped
	NotDelivering              // compresses, but its discharge valves do not open
)

// Window is one valve event of one turn.
type Window struct {
	Angle    float64 // degrees, the event as the pressure shows it (lasting departure from the closed line); NaN when not found
	Thermo   float64 // degrees, closed line extended to the plateau; the most repeatable angle; NaN when not found
	Expected float64 // degrees, from this turn's plateaus and a sealed cylinder's line; NaN when unknown
	Lo, Hi   float64 // degrees, the angular window in which the impact is booked; inside the padded grid; NaN when State is Lost or Idle
	State    State
	Conf     float64 // 0..1
	Shared   bool    // another event of this throw may ring inside this window
	Why      string  // one short clause: why the window is where it is, or why there is none
}

// Run is a closed stroke: both valves of the end shut. Grid indices, half open; OK false when none was found.
type Run struct {
	I0, I1 int
	OK     bool
	Slope  float64 // −d ln p / d ln V over the run (least squares)
	Sigma  float64 // scatter of ln p about the line
}

// Stroke indexes End.Closed.
const (
	Compression = 0
	Expansion   = 1
)

// End is what was found at one cylinder end in one turn.
type End struct {
	State      State
	W          [Events]Window
	Closed     [2]Run  // Compression, Expansion
	Ps, Pd     float64 // Pa, own suction and discharge plateau; NaN when unknown
	NotPresent bool    // the end has no pressure channel or does no work by design
	// Trapped is, for each closed stroke, the volume at which its line meets the plateau it starts from, m³: what
	// suction traps (Compression) and what discharge leaves behind (Expansion). NaN unknown. Under pulsation it may
	// lie a little beyond the dead centre.
	Trapped [2]float64
	// Clearance is the one that the trace was taken with when it fits another load step than the one told; NaN: as told.
	Clearance float64
}

// Throw is both ends; index crank.HE, crank.CE.
type Throw struct {
	Ends [2]End
}

// Result is the windows of one turn, one entry per throw of the turn.
type Result struct {
	Throws []Throw
}
