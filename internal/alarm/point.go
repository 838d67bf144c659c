package alarm

import (
	"encoding/json"
	"time"
)

// Point is one alarm point with everything that must outlive a restart.
type Point struct {
	Key      string          `json:"key"`
	Subject  string          `json:"subject"`
	Kind     string          `json:"kind"`
	State    State           `json:"state"`    // what is shown
	Severity Severity        `json:"severity"` // what is shown; none unless the point is open
	Sentence string          `json:"sentence"`
	Detail   json.RawMessage `json:"detail,omitempty"`
	Since    time.Time       `json:"since"` // of the last transition
	Turn     int64           `json:"turn"`  // of the evaluation that raised or last changed it
	Seq0     int64           `json:"seq0"`
	Seq1     int64           `json:"seq1"`
	Judged   bool            `json:"judged"` // the last evaluation could judge it
	Order    int             `json:"order,omitempty"`
	Note     string          `json:"note,omitempty"` // why it is shelved or suppressed

	ShelvedBy    string    `json:"shelved_by,omitempty"`
	ShelvedUntil time.Time `json:"shelved_until,omitzero"`
	ShelvedWhy   string    `json:"shelved_why,omitempty"`
	OutBy        string    `json:"out_by,omitempty"` // who took it out of service; empty: in service
	OutWhy       string    `json:"out_why,omitempty"`
	ByDesign     string    `json:"by_design,omitempty"`
	Chattering   bool      `json:"chattering,omitempty"`

	// What the point would show were it neither shelved nor suppressed.
	Inner     State         `json:"inner"`
	Level     Severity      `json:"level"`              // of Inner
	Announced bool          `json:"announced"`          // this occurrence has been shown to people
	OnFor     time.Duration `json:"on_for"`             // how long it has asked to rise
	OnTurns   int           `json:"on_turns,omitempty"` // the same in evaluations that could judge it
	OffTurns  int           `json:"off_turns,omitempty"`
	OnLevel   Severity      `json:"on_level"`  // the level held throughout OnFor
	OffFor    time.Duration `json:"off_for"`   // how long it has asked to fall
	OffLevel  Severity      `json:"off_level"` // the highest level during OffFor
	Rising    bool          `json:"rising"`
	Falling   bool          `json:"falling"`
	Last      time.Time     `json:"last,omitzero"`    // of the last evaluation that could judge it
	Recent    []time.Time   `json:"recent,omitempty"` // activations of the last minute, for chatter
}

// shown is what people see: a person's word comes before suppression by design, out of service before a shelf.
func (p *Point) shown() (State, Severity) {
	switch {
	case p.OutBy != "":
		return OutOfService, NoSeverity
	case !p.ShelvedUntil.IsZero():
		return Shelved, NoSeverity
	case p.ByDesign != "":
		return Suppressed, NoSeverity
	case p.Inner.Open():
		return p.Inner, p.Level
	}
	return p.Inner, NoSeverity
}

// rest clears both delays.
func (p *Point) rest() {
	p.Rising, p.OnFor, p.OnTurns, p.OnLevel = false, 0, 0, NoSeverity
	p.Falling, p.OffFor, p.OffTurns, p.OffLevel = false, 0, 0, NoSeverity
}
