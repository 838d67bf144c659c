package skid

import (
	"time"

	"lapwing/internal/crank"
	"lapwing/internal/frame"
	"lapwing/internal/gas"
)

// Skid is a machine as its skid file describes it, validated, in SI units. It is read only once loaded.
type Skid struct {
	File string // where it came from, for messages
	Raw  []byte // the file as read: travels with every clip
	Hash string // sha256 of Raw, hex

	ID   string // short name used in topics and file names: lower case, digits, '-'
	Name string // for people
	Site string // for people

	Rate float64 // samples per second and channel that the acquisition is meant to give, 0: taken from the source

	Machine   Machine
	Phase     Phase
	Gas       Gas
	Throws    []Throw
	Steps     []Step    // load steps; never empty: Steps[0] is "full" when the file names none
	Channels  []Channel // every input in use, ordered by input
	Process   Process   // fixed process values; what a CSV or Modbus gives replaces them
	Detection Detection
	Limits    []Limit
	Tape      Tape
	Uplink    Uplink
	Panel     Panel
	Modbus    Modbus

	at        map[string]Place  // where each path of the file stands; for messages after parsing
	channelAt map[string]string // path of each channel by id: Channels is sorted, the file is not
	defaulted []string          // settings that the file left out, "path = value", for the check
}

// Machine is what is common to all throws.
type Machine struct {
	RatedRPM, MinRPM, MaxRPM float64
	RodLoadCompression       float64 // N, rated combined rod load, 0 unknown
	RodLoadTension           float64 // N, positive number, 0 unknown
	GasLoadCompression       float64 // N, rated gas rod load (of frame and distance piece), 0 unknown
	GasLoadTension           float64 // N, positive number, 0 unknown
	Atmosphere               float64 // Pa, default 101325
	Inertia                  float64 // kg m², rotating, 0 unknown
}

// Phase describes the shaft reference.
type Phase struct {
	Channel      string      // channel id
	Index        string      // channel id of a mark apart, one a turn, beside a wheel whose teeth are all alike; empty: none
	Wheel        frame.Wheel // zero: one mark a turn
	MarksPerTurn int         // of the wheel; 1 without
	Falling      bool        // active edge
	AutoLevel    bool        // threshold found from the signal
	Threshold    float64     // V, when AutoLevel is false
	Hysteresis   float64     // V, 0: a quarter of the pulse height
	Uncertainty  float64     // degrees, 95 % half-width; 0: by the number of marks and what is known of the ripple
	Ripple       []Ripple    // where a load step gives none of its own
}

// Ripple is one harmonic of the speed within a turn: w = mean·(1 + Σ Amp·cos(Order·θ − Phase)), θ from the mark.
type Ripple struct {
	Order int
	Amp   float64 // fraction of mean speed
	Phase float64 // degrees
}

// Gas is what the machine compresses. Exactly one of Mixture and Fixed is set.
type Gas struct {
	Name    string
	Mixture *gas.Mixture
	Fixed   *gas.Fixed

	Listed    []gas.Fraction // the analysis as written, mole fractions; nil when the gas is named or fixed
	Unknown   float64        // share that the analysis does not name, 0: none
	Remainder string         // the component that the unknown share is taken as
	Water     float64        // mole fraction of water added by moisture, 0: none
	WaterAt   float64        // Pa, pressure for which the moisture was stated
}

// Throw is one cylinder on its crank throw.
type Throw struct {
	ID         string
	Stage      int            // 1-based; throws of one stage share line pressures and temperatures
	DeadCentre float64        // degrees of crank rotation from the phase mark to this throw's head-end dead centre, 0 <= . < 360
	Cylinder   crank.Cylinder // with no pocket open
	Ends       [2]End         // head end, crank end
	Accel      []string       // accelerometer channel ids

	// BlindAtSuction: the end that does not work stands at suction pressure, not at the atmosphere.
	BlindAtSuction bool
}

// End is one working side of a cylinder. A single-acting cylinder has Works false on its other end.
type End struct {
	Works     bool
	Pressure  string // channel id, empty when not measured
	Suction   []Valve
	Discharge []Valve
}

// Valve is one valve of a group. ID is <throw>.<he|ce>.<s|d><n>.
type Valve struct {
	ID                               string
	Cover                            string  // process tag of its cover temperature, empty when not measured
	FlowArea                         float64 // m², effective at full lift, 0 unknown
	Lift                             float64 // m, 0 unknown
	StiffnessNPerM, PreloadN, MassKg float64 // of plate with springs; 0 unknown: the model takes typical values
}

// Step is a load step: what the control system has put in or out.
type Step struct {
	Code   int
	Name   string
	Pocket map[string]float64 // end name (t1.he) → added clearance, fraction of that end's swept volume
	Idle   map[string]bool    // ends whose suction valves are held open
	Late   map[string]float64 // ends under late suction closing → degrees after that end's outer dead centre
	Ripple []Ripple           // of the shaft's speed in this step; none: Phase.Ripple holds
}

// Kind says what a channel measures.
type Kind string

// The kinds of channel.
const (
	PhaseMark    Kind = "phase"
	Pressure     Kind = "pressure"
	Acceleration Kind = "acceleration"
)

// Channel is one converter input and its way from counts to engineering units:
// volts = counts · VoltsFull / 2^(bits-1); value = (volts − ZeroV) · Gain, in SI (Pa absolute, m/s²; V for phase).
type Channel struct {
	ID        string
	Input     int // 0-based converter input
	Kind      Kind
	VoltsFull float64 // V at full scale code
	ZeroV     float64 // V that mean zero (Pa absolute zero for a pressure channel, gauge offset already in)
	Gain      float64 // SI units per volt
	Min, Max  float64 // SI, outside is not believable
	Passage   float64 // Hz, known resonance of the gauge passage; 0 unknown
	PassageQ  float64
}

// Scale gives engineering value = gain·counts + offset for a converter of the given width.
func (c Channel) Scale(bits int) (gain, offset float64) {
	perCount := c.VoltsFull / float64(int64(1)<<(bits-1))
	return perCount * c.Gain, -c.ZeroV * c.Gain
}

// Detection holds the settings of the line that a technician may want to change.
type Detection struct {
	GridDeg    float64    // default 0.5
	ImpactBand [2]float64 // Hz
	LeakBand   [2]float64 // Hz
	BlockTurns int        // turns per evidence block, default 15
	LearnTurns int        // turns of the declared-healthy run that a fresh baseline wants, default 600
}

// Limit is an absolute limit on one measure, beside the findings: subject, measure name, and bounds in the unit that
// stands in the measure's name.
type Limit struct {
	Subject           string  // e.g. t1, t1.he, t1.he.suction
	Measure           string  // a name of the measure layout, checked by CheckLimits
	High              float64 // NaN: none
	Low               float64 // NaN: none
	Deadband          float64
	OnDelay, OffDelay time.Duration
	OnTurns, OffTurns int      // the same in turns that could be judged; with a time as well, both must have passed
	Latch             bool     // stays until it is acknowledged and reset
	Unless            []string // duty states of its throw in which it is suppressed by design: starting, changing, unloaded, out-of-range
	Severity          string   // advisory, alert, danger
	From              string   // path of the rating that the limit was made from; empty: the file states the limit itself
}

// Tape bounds the rolling raw buffer.
type Tape struct {
	MaxBytes  int64
	MaxAge    time.Duration
	Pre, Post time.Duration // what an alarm protects before and after it
	ClipBytes int64         // quota of protected clips
	Thin      Thin
}

// Thin is what the buffer keeps of older samples. The zero value: all of them, until they roll away.
type Thin struct {
	Whole  time.Duration // everything newer is kept
	OneIn  int           // of the seconds that are older; 0: no thinning
	Hourly time.Duration // what is older than that keeps the first minute of each hour; 0: never
}

// Uplink is the MQTT side. Secrets live in files, never here.
type Uplink struct {
	Broker                                            string // tcp://host:port or tls://…; empty: no uplink
	Root                                              string // topic root, default "lapwing"
	ClientID                                          string
	UserFile, PasswordFile, CAFile, CertFile, KeyFile string
	FeaturesEvery                                     time.Duration // condensed features, default 10 s
	HealthEvery                                       time.Duration // default 30 s
	Commands                                          []string      // orders that the control room may give over MQTT; empty: none
	Dialect                                           string        // json or sparkplug
	Sparkplug                                         Sparkplug     // with dialect sparkplug only
}

// Panel is the local page.
type Panel struct {
	Listen string // default 127.0.0.1:8411; empty: none
}

// Process holds the process values at one instant. Index stages with Stage-1.
type Process struct {
	Step   int // load-step code
	Stages []Line
	Covers map[string]float64 // cover temperature by valve id, K
	Known  bool               // false: nothing is known (Stages empty): the line works from the traces
	Age    time.Duration      // how old the values are
}

// Line is one stage's suction and discharge line. NaN marks a value that is not known.
type Line struct {
	Ps, Pd float64 // Pa absolute
	Ts, Td float64 // K
}
