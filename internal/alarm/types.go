package alarm

import "time"

// State is an alarm point's state, IEC 62682 / ISA-18.2 terms. The zero value is Unknown, never Normal.
type State uint8

// The states of an alarm point.
const (
	Unknown State = iota
	Normal
	Unacked         // active, not acknowledged
	Acked           // active, acknowledged
	ReturnedUnacked // condition gone, not acknowledged
	Shelved         // by an operator, for a limited time
	Suppressed      // by design: machine stopped, starting, unloaded, duty not seen
	LatchedUnacked  // a latching point: condition gone, neither acknowledged nor reset
	LatchedAcked    // a latching point: condition gone, acknowledged, waits for a reset
	OutOfService    // taken out by a person, with a reason and without an end: maintenance
)

// Severity ranks alarms: advisory, alert, danger.
type Severity uint8

// Severities, in rising order.
const (
	NoSeverity Severity = iota
	Advisory
	Alert
	Danger
)

// Condition is what a point is told at each evaluation.
type Condition struct {
	Key        string // stable name of the point: "t1.he.suction/leaking", "t1/rod_load_max_kn/high"
	Subject    string
	Kind       string
	Severity   Severity // of the condition now; NoSeverity: not present
	Known      bool     // false: cannot be judged now (a gap never clears an alarm)
	ByDesign   string   // non-empty: suppressed by design, and why
	Sentence   string
	Detail     any // carried into the transition as JSON (a verdict.Finding's wire form, a limit's numbers); may be nil
	Turn       int64
	Seq0, Seq1 int64
}

// Transition is one change of an alarm point: one record of the journal.
type Transition struct {
	ID       uint64    `json:"id"` // increases by one for ever, also over restarts
	Key      string    `json:"key"`
	Subject  string    `json:"subject"`
	Kind     string    `json:"kind"`
	From     State     `json:"from"`
	To       State     `json:"to"`
	Severity Severity  `json:"severity"`
	Was      Severity  `json:"was"` // severity before
	At       time.Time `json:"at"`
	Turn     int64     `json:"turn"`
	Seq0     int64     `json:"seq0"`
	Seq1     int64     `json:"seq1"`
	Sentence string    `json:"sentence"`
	By       string    `json:"by,omitempty"` // who acknowledged, shelved, took out of service …
	Note     string    `json:"note,omitempty"`
	Order    int       `json:"order,omitempty"` // place in the first-up order: 1 came first since nothing stood; 0 not standing
	Flood    bool      `json:"flood,omitempty"` // more activations than a person can follow are coming in
	Detail   any       `json:"detail,omitempty"`
}

// Act is one order of a person, carried out or refused: the other kind of record of the journal. It stands before the
// transitions that it made.
type Act struct {
	ID          uint64    `json:"id"`    // rises by one for ever, apart from the transitions' ids
	After       uint64    `json:"after"` // id of the newest transition when it was done: its place among them
	At          time.Time `json:"at"`
	Verb        string    `json:"verb"`
	Key         string    `json:"key,omitempty"`     // alarm point
	Subject     string    `json:"subject,omitempty"` // valve group, baseline …, for orders that are not about an alarm point
	By          string    `json:"by"`
	Reason      string    `json:"reason,omitempty"`
	Via         string    `json:"via"` // page, api, tool, mqtt, modbus
	Accepted    bool      `json:"accepted"`
	Said        string    `json:"said"`                  // what was done, or why it was refused
	Transitions []uint64  `json:"transitions,omitempty"` // ids of what it changed
	Clip        string    `json:"clip,omitempty"`        // raw samples it protected
}
