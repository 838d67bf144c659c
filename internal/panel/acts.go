package panel

import "lapwing/internal/wire"

// act is something a person may order of an alarm point.
type act struct {
	Verb, Label string
	Asks        bool // a reason is needed
	Timed       bool // it ends
}

var (
	actAcknowledge = act{Verb: wire.VerbAcknowledge, Label: "Acknowledge"}
	actReset       = act{Verb: wire.VerbReset, Label: "Reset"}
	actShelve      = act{Verb: wire.VerbShelve, Label: "Shelve", Asks: true, Timed: true}
	actUnshelve    = act{Verb: wire.VerbUnshelve, Label: "Unshelve"}
	actTakeOut     = act{Verb: wire.VerbTakeOut, Label: "Take out of service", Asks: true}
	actReturn      = act{Verb: wire.VerbReturn, Label: "Return to service"}
)

// actsFor lists what makes sense in a state (IEC 62682); the line decides, and may refuse.
func actsFor(state string) []act {
	switch state {
	case "unacknowledged", "returned-unacknowledged", "latched-unacknowledged":
		return []act{actAcknowledge, actShelve, actTakeOut}
	case "latched-acknowledged":
		return []act{actReset, actShelve, actTakeOut}
	case "acknowledged", "normal":
		return []act{actShelve, actTakeOut}
	case "shelved":
		return []act{actUnshelve}
	case "out-of-service":
		return []act{actReturn}
	}
	return nil // suppressed by design: nobody's order
}
