package skid

import (
	"fmt"
	"slices"
	"strings"
)

// commandVerbs are the orders that can be allowed over MQTT: wire.CommandVerbs, held to it by a test of station.
var commandVerbs = []string{"acknowledge", "cut-clip", "rebirth", "reset", "shelve", "unshelve"}

func (r *reader) commands(s *object, u *Uplink) {
	fix := "list what the control room may order: [" + strings.Join(commandVerbs, ", ") + "]; leave it out for nothing"
	for i, n := range s.list("commands", 1, len(commandVerbs), false, fix) {
		path := fmt.Sprintf("uplink.commands[%d]", i)
		v, ok := r.word(n, path, nil, "an order")
		switch {
		case !ok:
		case !slices.Contains(commandVerbs, v):
			r.problem(place(n), path, fix, "%q is no order that can come over MQTT", clip(v))
		case slices.Contains(u.Commands, v):
			r.problem(place(n), path, "write it once", "%s is allowed already", v)
		default:
			u.Commands = append(u.Commands, v)
		}
	}
	if len(u.Commands) > 0 && u.Broker == "" {
		s.wrong("commands", "name the broker, or leave the commands out", "there is no broker that they could come from")
	}
}
