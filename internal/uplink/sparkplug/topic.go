package sparkplug

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

const namespace = "spBv1.0" // tck-id-topic-structure-namespace-a

// Kind is a message type of the topic.
type Kind string

// The message types of an edge node and its devices, and the command to it.
const (
	NBirth Kind = "NBIRTH"
	NDeath Kind = "NDEATH"
	NData  Kind = "NDATA"
	DBirth Kind = "DBIRTH"
	DDeath Kind = "DDEATH"
	DData  Kind = "DDATA"
	NCmd   Kind = "NCMD"
)

// CheckID tells whether a text may be a group, edge node, device or host id: one level of a topic, with nothing that
// means something there (tck-id-topic-structure-namespace-valid-group-id, -valid-edge-node-id, -valid-device-id).
func CheckID(what, id string) error {
	switch {
	case id == "":
		return fmt.Errorf("sparkplug: no %s", what)
	case strings.ContainsAny(id, "+/#"):
		return fmt.Errorf("sparkplug: %s %q: '+', '/' and '#' cannot stand in it", what, id)
	case !utf8.ValidString(id) || strings.ContainsFunc(id, unicode.IsControl):
		return fmt.Errorf("sparkplug: %s %q holds what is no text", what, id)
	case len(id) > 1000:
		return fmt.Errorf("sparkplug: %s of %d bytes", what, len(id))
	}
	return nil
}

// Topic is namespace/group/kind/node, and /device for a device (tck-id-topic-structure).
func (n *Node) Topic(k Kind, device string) string {
	t := namespace + "/" + n.group + "/" + string(k) + "/" + n.id
	if device != "" {
		t += "/" + device
	}
	return t
}

// StateTopic is where a host says whether it is there (tck-id-host-topic-phid-birth-topic).
func StateTopic(host string) string { return namespace + "/STATE/" + host }
