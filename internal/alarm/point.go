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
	ByDesign     string    `json:"by_design,omitempty"`
	Chattering   bool      `json:"chattering,omitempty"`

	// What the point would show were it neither shelved nor suppressed.
	Inner     State         `json:"inner"`
	Level     Severity      `json:"level"`     // of Inner
	Announced bool          `json:"announced"` // this occurrence has been shown to people
	OnFor     time.Duration `json:"on_for"`    // how long it has asked to rise
	OnLevel   Severity      `json:"on_level"`  // the level held throughout OnFor
	OffFor    time.Duration `json:"off_for"`   // how long it has asked to fall
	OffLevel  Severity      `json:"off_level"` // the highest level during OffFor
	Rising    bool          `json:"rising"`
	Falling   bool          `json:"falling"`
	Last      time.Time     `json:"last,omitzero"`    // of the last evaluation that could judge it
	Recent    []time.Time   `json:"recent,omitempty"` // activations of the last minute, for chatter
}

// shown is what people see: shelving hides everything (a person asked for it), suppression by design comes next.
func (p *Point) shown() (State, Severity) {
	switch {
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
	p.Rising, p.Falling, p.OnFor, p.OffFor, p.OnLevel, p.OffLevel = false, false, 0, 0, NoSeverity, NoSeverity
}
