package uplink

import (
	"errors"
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Topics builds the topic tree of one skid: <root>/<skid>/…
//
//	alarm                       every alarm transition, once in effect, in order
//	standing/<subject>/<kind>   present state of an alarm that is not normal; retained; empty when it is normal again
//	features/<throw>            condensed features, newest only
//	health                      what the daemon knows of itself; retained; the last will says offline
//	command                     orders of the control room to the daemon, if the skid file allows any
//	receipt                     what became of each of them
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

// Command is the topic on which the daemon hears orders.
func (t Topics) Command() string { return t.base() + "/command" }

// Receipt is the topic of the answers to them.
func (t Topics) Receipt() string { return t.base() + "/receipt" }

func (t Topics) check() error {
	if err := checkRoot(t.Root); err != nil {
		return err
	}
	if t.Skid == "" || strings.Contains(t.Skid, "/") {
		return fmt.Errorf("uplink: skid %q: write a name without a slash", t.Skid)
	}
	return checkTopic(t.Health())
}

// checkRoot accepts one or more levels, e.g. lapwing or plant/lapwing.
func checkRoot(root string) error {
	if root == "" || strings.HasPrefix(root, "/") || strings.HasSuffix(root, "/") {
		return fmt.Errorf("uplink: topic root %q: write one or more names with a slash between them", root)
	}
	if strings.HasPrefix(root, "$") {
		return fmt.Errorf("uplink: topic root %q: names that begin with $ belong to the broker", root)
	}
	return checkTopic(root)
}

// checkTopic refuses what a broker answers by closing the connection (MQTT 3.1.1, sections 1.5.3, 3.3.2 and 4.7).
func checkTopic(topic string) error {
	switch {
	case topic == "":
		return errors.New("uplink: empty topic")
	case len(topic) > 65535:
		return fmt.Errorf("uplink: topic of %d bytes, 65535 are allowed", len(topic))
	case !utf8.ValidString(topic) || strings.ContainsFunc(topic, unicode.IsControl):
		return fmt.Errorf("uplink: topic %q holds what is no text", topic)
	case strings.ContainsAny(topic, "+#"):
		return fmt.Errorf("uplink: topic %q holds a wildcard", topic)
	}
	return nil
}

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
