package alarm

import "fmt"

var stateText = [...]string{"unknown", "normal", "unacknowledged", "acknowledged", "returned-unacknowledged", "shelved",
	"suppressed", "latched-unacknowledged", "latched-acknowledged", "out-of-service"}

var severityText = [...]string{"none", "advisory", "alert", "danger"}

// String gives the state's name as it stands in the journal.
func (s State) String() string {
	if int(s) < len(stateText) {
		return stateText[s]
	}
	return fmt.Sprintf("state(%d)", uint8(s))
}

// MarshalText writes the state's name.
func (s State) MarshalText() ([]byte, error) {
	if int(s) >= len(stateText) {
		return nil, fmt.Errorf("alarm: no such state: %d", uint8(s))
	}
	return []byte(stateText[s]), nil
}

// UnmarshalText reads what MarshalText wrote.
func (s *State) UnmarshalText(b []byte) error {
	for i, t := range stateText {
		if t == string(b) {
			*s = State(i)
			return nil
		}
	}
	return fmt.Errorf("alarm: no such state: %q", b)
}

// Active reports whether the condition stands and is shown.
func (s State) Active() bool { return s == Unacked || s == Acked }

// Open reports whether the point still asks something of a person: it stands, or it waits for an acknowledgement or a reset.
func (s State) Open() bool {
	switch s {
	case Unacked, Acked, ReturnedUnacked, LatchedUnacked, LatchedAcked:
		return true
	}
	return false
}

// String gives the severity's name.
func (s Severity) String() string {
	if int(s) < len(severityText) {
		return severityText[s]
	}
	return fmt.Sprintf("severity(%d)", uint8(s))
}

// MarshalText writes the severity's name.
func (s Severity) MarshalText() ([]byte, error) {
	if int(s) >= len(severityText) {
		return nil, fmt.Errorf("alarm: no such severity: %d", uint8(s))
	}
	return []byte(severityText[s]), nil
}

// UnmarshalText reads what MarshalText wrote, and what a skid file says.
func (s *Severity) UnmarshalText(b []byte) error {
	for i, t := range severityText {
		if t == string(b) {
			*s = Severity(i)
			return nil
		}
	}
	return fmt.Errorf("alarm: no such severity: %q", b)
}
