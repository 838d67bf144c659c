package uplink

import (
	"encoding/json"

	"lapwing/internal/wire"
)

// showReceipt prints what became of a command. The command itself is not printed: it may never have been heard.
func (r *Reader) showReceipt(skid string, m Received) {
	var a wire.Receipt
	if err := json.Unmarshal(m.Payload, &a); err != nil {
		r.unreadable(m, err)
		return
	}
	what := "refused"
	if a.Accepted {
		what = "carried out"
	}
	r.say("%s: order %s of %s by %s %s: %s\n", skid, a.Verb, a.Request, a.By, what, a.Said)
}
