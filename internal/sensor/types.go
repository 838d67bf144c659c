package sensor

// Category is what NAMUR NE 107 calls the status of a device. The zero value is not good.
type Category uint8

// The categories, with what each means for the use of the channel.
const (
	FunctionCheck       Category = iota // nothing is known yet: no whole turn has been looked at
	Good                                // nothing is wrong
	MaintenanceRequired                 // the signal is good, but somebody should look at the channel; it stays in use
	OutOfSpecification                  // the signal is doubtful; the channel is withdrawn
	Failure                             // the signal is not that of the measured quantity; the channel is withdrawn
)

var categoryNames = [...]string{"function check", "good", "maintenance required", "out of specification", "failure"}

func (c Category) String() string {
	if int(c) < len(categoryNames) {
		return categoryNames[c]
	}
	return "invalid"
}

// Kind says what a channel measures.
type Kind uint8

// The kinds.
const (
	Phase Kind = iota
	Pressure
	Acceleration
)

// Channel is one converter input: volts = counts·PerCount, value = Gain·(volts − ZeroV) in Pa absolute or m/s².
type Channel struct {
	ID       string
	Input    int // index into frame.Frame.Counts
	Kind     Kind
	PerCount float64 // V per code, > 0
	FullV    float64 // V at full scale, > 0
	ZeroV    float64 // V that mean zero
	Gain     float64 // SI unit per V
	Min, Max float64 // SI, outside is not believable; both zero: not checked

	Teeth bool // of a phase channel: a wheel's teeth, beside a mark apart on another one

	// Of a pressure channel: degrees of rotation from the mark to the dead centre with the least volume of its end
	// (crank end: half a turn after the head end's), NaN when not known.
	InnerDead float64
}

// Config describes the inputs. Zero values take the defaults.
type Config struct {
	Rate     float64 // samples per second
	Channels []Channel
	Learn    int     // good turns from which the usual levels are learnt; default 100
	Hold     int     // turns without suspicion before a channel is believed again; default 50
	MainsHz  float64 // 50 or 60; 0: both are looked for

	// Do, where given, calls f with 0 to n-1, each once, and returns when all have come back; several may run at the
	// same time. Channels are scanned by it, with the same bits whatever the order. Nil: a plain loop.
	Do func(n int, f func(i int))
}

// Fault is what can be wrong with a channel.
type Fault uint8

// The faults, the gravest first: of several the first is shown.
const (
	Flat        Fault = iota // one code for a stretch that no live signal stands still
	OpenCable                // mains and little else
	Dead                     // no trace of the machine
	LostBias                 // mean off: supply, barrier or cable
	Swapped                  // the signal of another kind of sensor, or of the other end
	Range                    // outside what can be believed
	Clipped                  // cut off at a rail
	Noisy                    // far noisier than usual
	Hum                      // mains far above usual
	Gain                     // everything larger or smaller: see Shift
	Zero                     // both plateaus shifted against the machine's other ends: see Shift
	Sensitivity              // a pressure reads too large or too small in proportion: see Tell
	Drift                    // a pressure's zero has drifted beyond what is taken off it: see Tell
	Gauge                    // the gauge passage rings otherwise than it did: see Tell
	NoMarks                  // phase reference: no marks though the shaft was at speed
	Unsteady                 // phase reference: marks missing, or at impossible times
	Pulses                   // phase reference: extra, ringing or weak pulses
	Teeth                    // phase reference: teeth of the wheel missing
	Slipped                  // phase reference: the dead centres have moved against it: see Tell
	Faint                    // phase reference: marks that hardly stand out of the noise
	faults
)

var faultNames = [...]string{"flat", "open cable", "dead", "lost bias", "swapped", "out of range", "clipped", "noisy", "hum",
	"gain", "zero", "sensitivity", "zero drift", "gauge passage", "no marks", "marks missing", "pulses", "teeth missing", "phase slip",
	"faint marks"}

func (f Fault) String() string {
	if int(f) < len(faultNames) {
		return faultNames[f]
	}
	return "invalid"
}

// category of a fault on a kind of channel. Hum lies far below the impact and leak bands of an accelerometer and spoils
// nothing there; in a pressure it bends the trace.
func (f Fault) category(k Kind) Category {
	switch f {
	case Flat, OpenCable, Dead, LostBias, Swapped, NoMarks:
		return Failure
	case Hum:
		if k == Acceleration {
			return MaintenanceRequired
		}
	case Pulses, Teeth, Slipped, Faint, Drift, Gauge, Sensitivity:
		return MaintenanceRequired
	}
	return OutOfSpecification
}

// withdraws says whether a channel with this fault may not be used. Gain and zero are the judge's: it takes the
// signal out of its findings and must go on seeing it.
func (f Fault) withdraws(k Kind) bool {
	return f != Gain && f != Zero && k != Phase && f.category(k) >= OutOfSpecification
}

// State is how a channel is doing.
type State struct {
	Category Category
	Fault    Fault  // when Category is worse than Good
	Reason   string // one sentence: what is seen and what people usually look at; empty when Good
	Since    int64  // turn of the first suspicion
	First    int64  // sample number from which the channel is suspect
	Judge    bool   // it is the judge's to raise an alarm on it
}
