package sparkplug

import (
	"fmt"
	"reflect"
	"slices"
	"time"
)

// Message is what is to be published: at QoS 0 and not retained, as the specification has it for all that an edge node
// sends (tck-id-payloads-nbirth-qos, -nbirth-retain and their like), but for the will.
type Message struct {
	Kind    Kind
	Device  string // empty: of the node itself
	Topic   string
	Payload []byte
}

const (
	bdSeqName   = "bdSeq"
	rebirthName = "Node Control/Rebirth"
)

// Node is one edge node with its devices: what it has said and what it would say now. It remembers over sessions, so
// that a birth tells the newest value of everything.
type Node struct {
	group, id string
	node      table
	devices   []string // in order of birth
	device    map[string]*table
	aliases   uint64
	seq       uint8
	bdSeq     uint8
	born      bool
}

// table holds the metrics of the node or of one device, in the order in which they were first named.
type table struct {
	entries []entry
	index   map[string]int
	dead    bool // a device that cannot be heard
}

type entry struct {
	Metric
	alias uint64 // 0: none
}

// NewNode checks the names. Devices are born in this order.
func NewNode(group, id string, devices ...string) (*Node, error) {
	n := &Node{group: group, id: id, devices: slices.Clone(devices), device: map[string]*table{}}
	n.node.index = map[string]int{}
	if err := CheckID("group id", group); err != nil {
		return nil, err
	}
	if err := CheckID("edge node id", id); err != nil {
		return nil, err
	}
	if group == "STATE" {
		return nil, fmt.Errorf("sparkplug: group id %q is the name of another topic", group)
	}
	for _, d := range devices {
		if err := CheckID("device id", d); err != nil {
			return nil, err
		}
		if n.device[d] != nil { // tck-id-topic-structure-namespace-unique-device-id
			return nil, fmt.Errorf("sparkplug: two devices %q", d)
		}
		n.device[d] = &table{index: map[string]int{}}
	}
	return n, nil
}

func (n *Node) table(device string) *table {
	if device == "" {
		return &n.node
	}
	return n.device[device]
}

// Will begins a session: the death certificate goes into CONNECT with QoS 1, not retained, and carries no sequence
// number (tck-id-payloads-ndeath-will-message-qos, -will-message-retain, -ndeath-seq, tck-id-topics-ndeath-payload).
func (n *Node) Will(bdSeq uint8, now time.Time) Message {
	n.bdSeq, n.born = bdSeq, false
	return n.Death(now)
}

// Death is what the node says when it leaves by itself (tck-id-operational-behavior-edge-node-intentional-disconnect-ndeath).
func (n *Node) Death(now time.Time) Message {
	b := appendVarint(nil, payloadTimestamp, millis(now))
	b = appendMetric(b, &Metric{Name: bdSeqName, Type: Int64, Value: int64(n.bdSeq), At: now}, 0, true)
	return Message{Kind: NDeath, Topic: n.Topic(NDeath, ""), Payload: b}
}

// End forgets the session: what is set from now on waits for the next birth.
func (n *Node) End() { n.born = false }

// Born tells whether this session has had its birth.
func (n *Node) Born() bool { return n.born }

// Birth says everything: the node and then each device that is alive, before anything else
// (tck-id-payloads-dbirth-order, tck-id-message-flow-device-birth-publish-nbirth-wait). A rebirth is the same, with the
// same bdSeq (tck-id-payloads-nbirth-bdseq-repeat).
func (n *Node) Birth(now time.Time) []Message {
	n.born, n.seq = true, 0
	b := n.open(now)
	b = appendMetric(b, &Metric{Name: bdSeqName, Type: Int64, Value: int64(n.bdSeq), At: now}, n.alias(&n.node, bdSeqName, Int64), true)
	// tck-id-operational-behavior-data-commands-rebirth-name-aliases: the one metric without an alias
	b = appendMetric(b, &Metric{Name: rebirthName, Type: Boolean, Value: false, At: now}, 0, true)
	b = n.node.all(b, now)
	out := []Message{{Kind: NBirth, Topic: n.Topic(NBirth, ""), Payload: n.close(b)}}
	for _, d := range n.devices {
		if !n.device[d].dead {
			out = append(out, n.deviceBirth(d, now))
		}
	}
	return out
}

// alias gives the alias of a metric that the node itself fills in.
func (n *Node) alias(t *table, name string, typ Type) uint64 {
	i, known := t.index[name]
	if !known {
		i = n.define(t, Metric{Name: name, Type: typ})
	}
	return t.entries[i].alias
}

func (n *Node) define(t *table, m Metric) int {
	n.aliases++ // unique over node and devices: tck-id-payloads-alias-uniqueness
	i := len(t.entries)
	t.entries = append(t.entries, entry{Metric: m, alias: n.aliases})
	t.index[m.Name] = i
	return i
}

// all writes every metric as a birth does; one that was never known has the time of the birth.
func (t *table) all(b []byte, now time.Time) []byte {
	for i := range t.entries {
		e := t.entries[i]
		if e.Name == bdSeqName {
			continue
		}
		if e.At.IsZero() {
			e.At = now
		}
		e.Historical = false
		b = appendMetric(b, &e.Metric, e.alias, true)
	}
	return b
}

func (n *Node) open(now time.Time) []byte { return appendVarint(nil, payloadTimestamp, millis(now)) }

// close ends a payload with the next sequence number (tck-id-payloads-sequence-num-incrementing).
func (n *Node) close(b []byte) []byte {
	b = appendVarint(b, payloadSeq, uint64(n.seq))
	n.seq++
	return b
}

func (n *Node) deviceBirth(d string, now time.Time) Message {
	return Message{Kind: DBirth, Device: d, Topic: n.Topic(DBirth, d), Payload: n.close(n.device[d].all(n.open(now), now))}
}

// Define names metrics before they have a value: every metric must stand in the birth (tck-id-topics-nbirth-metric-reqs).
// What is known already keeps its value.
func (n *Node) Define(device string, ms ...Metric) {
	t := n.table(device)
	if t == nil {
		return
	}
	for _, m := range ms {
		if _, known := t.index[m.Name]; !known && reserved(m.Name) == nil {
			n.define(t, m)
		}
	}
}

func reserved(name string) error {
	if name == "" || name == bdSeqName || name == rebirthName {
		return fmt.Errorf("sparkplug: metric %q is the node's own", name)
	}
	return nil
}

// Set takes new values and gives what is to be published for it: those that have changed, and every historical one. A
// name that is new is told by a birth first. Without a birth in this session, or while the device is dead, values are
// kept for the next one and nothing is to be published; historical ones are then lost to the wire, and it is for the
// caller not to hand them over.
func (n *Node) Set(device string, ms []Metric, now time.Time) []Message {
	t := n.table(device)
	if t == nil || len(ms) == 0 {
		return nil
	}
	var changed []int // of ms
	fresh := false
	for k := range ms {
		m := &ms[k]
		if reserved(m.Name) != nil {
			continue
		}
		i, known := t.index[m.Name]
		if !known {
			first := *m
			if m.Historical { // what it is now is not known by this
				first.Value, first.Props, first.At = nil, nil, time.Time{}
			}
			n.define(t, first)
			fresh = true
			if m.Historical {
				changed = append(changed, k)
			}
			continue
		}
		e := &t.entries[i]
		switch {
		case m.Historical:
			changed = append(changed, k)
		case m.Type != e.Type: // the type is part of the birth
			e.Metric, fresh = *m, true
		default:
			same := e.Value == m.Value && reflect.DeepEqual(e.Props, m.Props)
			e.Metric = *m
			if !same {
				changed = append(changed, k)
			}
		}
	}
	if !n.born || t.dead {
		return nil
	}
	var out []Message
	if fresh {
		if device == "" {
			out = n.Birth(now)
		} else {
			out = []Message{n.deviceBirth(device, now)}
		}
		changed = slices.DeleteFunc(changed, func(k int) bool { return !ms[k].Historical }) // the birth has said the others
	}
	if len(changed) == 0 {
		return out
	}
	b := n.open(now)
	for _, k := range changed {
		m := ms[k]
		if m.At.IsZero() {
			m.At = now
		}
		b = appendMetric(b, &m, t.entries[t.index[m.Name]].alias, false)
	}
	kind := NData
	if device != "" {
		kind = DData
	}
	return append(out, Message{Kind: kind, Device: device, Topic: n.Topic(kind, device), Payload: n.close(b)})
}

// Bury says that a device cannot be heard any more; Raise that it can (tck-id-operational-behavior-device-ddeath). Nil
// when that is known.
func (n *Node) Bury(device string, now time.Time) []Message {
	t := n.device[device]
	if t == nil || t.dead {
		return nil
	}
	t.dead = true
	if !n.born {
		return nil
	}
	return []Message{{Kind: DDeath, Device: device, Topic: n.Topic(DDeath, device), Payload: n.close(n.open(now))}}
}

// Raise is the end of Bury.
func (n *Node) Raise(device string, now time.Time) []Message {
	t := n.device[device]
	if t == nil || !t.dead {
		return nil
	}
	t.dead = false
	if !n.born {
		return nil
	}
	return []Message{n.deviceBirth(device, now)}
}

// Names lists the metrics of the node (device "") or of a device, in the order of the birth, without the node's own.
func (n *Node) Names(device string) (out []string) {
	t := n.table(device)
	if t == nil {
		return nil
	}
	for i := range t.entries {
		if t.entries[i].Name != bdSeqName {
			out = append(out, t.entries[i].Name)
		}
	}
	return out
}

const maxCommand = 1 << 16 // bytes

// Command reads an NCMD. The one command that this node obeys is a birth; refused names the others.
func (n *Node) Command(payload []byte) (rebirth bool, refused []string, err error) {
	if len(payload) > maxCommand {
		return false, nil, fmt.Errorf("sparkplug: a command of %d bytes", len(payload))
	}
	h, err := Decode(payload)
	if err != nil {
		return false, nil, err
	}
	for i := range h.Metrics {
		m := &h.Metrics[i]
		if m.Name == rebirthName {
			if v, ok := m.Value.(bool); ok && v && !m.Null {
				rebirth = true
			}
			continue
		}
		name := m.Name
		if name == "" {
			name = fmt.Sprintf("alias %d", m.Alias)
		}
		refused = append(refused, name)
	}
	return rebirth, refused, nil
}
