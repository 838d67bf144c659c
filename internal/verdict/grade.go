package verdict

import (
	"fmt"

	"lapwing/internal/measure"
)

// The kinds of finding.
const (
	Leaking       = "leaking"
	ImpactingHard = "impacting-hard"
	OpeningLate   = "opening-late"
	Fluttering    = "fluttering"
	DeadCentre    = "dead-centre"        // the angle reference has moved
	PressureZero  = "pressure-zero"      // a pressure channel's zero has moved
	Clearance     = "clearance"          // the clearance volume is not what it was: pocket, carbon, liquid
	GasChanged    = "gas"                // the gas is not what the baseline was learnt with
	AccelGain     = "accelerometer-gain" // an accelerometer reads larger or smaller on everything
)

var gradeText = [...]string{"none", "advisory", "alert", "danger"}

// String gives the grade's name.
func (g Grade) String() string {
	if int(g) < len(gradeText) {
		return gradeText[g]
	}
	return fmt.Sprintf("grade(%d)", uint8(g))
}

// MarshalText writes the grade's name.
func (g Grade) MarshalText() ([]byte, error) {
	if int(g) >= len(gradeText) {
		return nil, fmt.Errorf("verdict: no such grade: %d", uint8(g))
	}
	return []byte(gradeText[g]), nil
}

// UnmarshalText reads what MarshalText wrote.
func (g *Grade) UnmarshalText(b []byte) error {
	for i, t := range gradeText {
		if t == string(b) {
			*g = Grade(i)
			return nil
		}
	}
	return fmt.Errorf("verdict: no such grade: %q", b)
}

// classes is how many classes of evidence there are.
const classes = int(measure.Process) + 1
