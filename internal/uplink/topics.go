package uplink

import "strings"

// Topics builds the topic tree of one skid: <root>/<skid>/…
//
//	alarm                       every alarm transition, once in effect, in order
//	standing/<subject>/<kind>   present state of an alarm that is not normal; retained; empty when it is normal again
//	features/<throw>            condensed features, newest only
//	health                      what the daemon knows of itself; retained; the last will says offline
type Topics struct{ Root, Skid string }

func (t Topics) base() string { return t.Root + "/" + t.Skid }

// Alarm is the topic of alarm transitions.
func (t Topics) Alarm() string { return t.base() + "/alarm" }

// Standing is the retained topic of one alarm point; key is "<subject>/<kind>".
func (t Topics) Standing(key string) string { return t.base() + "/standing/" + key }

// Features is the topic of one throw's condensed features.
func (t Topics) Features(throw string) string { return t.base() + "/features/" + throw }

// Health is the retained topic of the daemon's own state and its last will.
func (t Topics) Health() string { return t.base() + "/health" }

// Part names what a topic of any skid under root carries: "alarm", "standing", "features", "health", or "".
func Part(root, topic string) (skid, part, rest string) {
	s, ok := strings.CutPrefix(topic, root+"/")
	if !ok {
		return "", "", ""
	}
	f := strings.SplitN(s, "/", 3)
	if len(f) < 2 {
		return "", "", ""
	}
	if len(f) == 3 {
		rest = f[2]
	}
	return f[0], f[1], rest
}
