// Package sparkplugtest is the specification of Sparkplug B 3.0 as a host that listens for breaches of it. Each is named
// by the rule's identifier (tck-id-…, as in the Eclipse Sparkplug project's public specification and its requirements
// table; where the two differ between drafts and version 3.0, STATE with its timestamp and a bdSeq that wraps after 255,
// as version 3.0 has them).
package sparkplugtest

import (
	"fmt"
	"strings"

	"lapwing/internal/uplink/sparkplug"
)

// Host hears one edge node. Feed it everything in the order in which a broker took it.
type Host struct {
	Group, Node string

	Breaches []string
	Births   int                                         // NBIRTH heard
	Values   map[string]map[string]sparkplug.HeardMetric // device ("" the node) and name to what it is now
	Stories  []Story                                     // historical metrics and changes, in order

	will   int // bdSeq of the last CONNECT; -1: none
	bdSeq  int // of the last NBIRTH
	seq    int // of the last message
	online bool
	named  map[uint64]name
	alive  map[string]bool
	folded map[string]string
}

// Story is one metric of a data message.
type Story struct {
	Device, Name string
	sparkplug.HeardMetric
}

type name struct {
	device, name string
	typ          sparkplug.Type
}

// New gives a host that has heard nothing.
func New(group, node string) *Host { return &Host{Group: group, Node: node, will: -1, bdSeq: -1} }

func (h *Host) breach(rule, format string, args ...any) {
	h.Breaches = append(h.Breaches, "tck-id-"+rule+": "+fmt.Sprintf(format, args...))
}

// Connect is the will of a CONNECT packet.
func (h *Host) Connect(topic string, qos byte, retain bool, payload []byte) {
	const flow = "message-flow-edge-node-birth-publish-will-message"
	if topic != "spBv1.0/"+h.Group+"/NDEATH/"+h.Node {
		h.breach(flow+"-topic", "%s", topic)
	}
	if qos != 1 {
		h.breach(flow+"-qos", "QoS %d", qos)
	}
	if retain {
		h.breach(flow+"-will-retained", "retained")
	}
	n := h.death(payload)
	if h.will >= 0 && n != (h.will+1)%256 {
		h.breach(flow+"-payload-bdSeq", "%d after %d", n, h.will)
	}
	h.will, h.online = n, false
}

// death checks an NDEATH and gives its bdSeq.
func (h *Host) death(payload []byte) int {
	p, err := sparkplug.Decode(payload)
	if err != nil {
		h.breach("message-flow-edge-node-birth-publish-will-message-payload", "%v", err)
		return -1
	}
	if p.Seq >= 0 {
		h.breach("payloads-ndeath-seq", "sequence number %d", p.Seq)
	}
	if len(p.Metrics) != 1 || p.Metrics[0].Name != "bdSeq" {
		h.breach("topics-ndeath-payload", "metrics %+v", p.Metrics)
		return -1
	}
	return h.bdSeqOf(&p.Metrics[0])
}

func (h *Host) bdSeqOf(m *sparkplug.HeardMetric) int {
	v, ok := m.Value.(uint64)
	if m.Type != sparkplug.Int64 || !ok || v > 255 {
		h.breach("message-flow-edge-node-birth-publish-will-message-payload-bdSeq", "%v of %v", m.Value, m.Type)
		return -1
	}
	return int(v)
}

// Hear is one PUBLISH.
func (h *Host) Hear(topic string, qos byte, retain bool, payload []byte) {
	f := strings.Split(topic, "/")
	if len(f) < 4 || len(f) > 5 || f[0] != "spBv1.0" || f[1] != h.Group || f[3] != h.Node {
		h.breach("topic-structure", "%s", topic)
		return
	}
	kind, device := sparkplug.Kind(f[2]), ""
	ofDevice := kind == sparkplug.DBirth || kind == sparkplug.DData || kind == sparkplug.DDeath
	if (len(f) == 5) != ofDevice {
		h.breach("topic-structure-namespace-device-id-associated-message-types", "%s", topic)
		return
	}
	if ofDevice {
		device = f[4]
	}
	if kind == sparkplug.NDeath {
		if retain {
			h.breach("payloads-ndeath-will-message-retain", "retained")
		}
		if n := h.death(payload); n != h.bdSeq {
			h.breach("operational-behavior-edge-node-intentional-disconnect-ndeath", "bdSeq %d, born with %d", n, h.bdSeq)
		}
		h.online = false
		return
	}
	if qos != 0 || retain {
		h.breach("topics-"+strings.ToLower(f[2])+"-mqtt", "QoS %d, retained %v", qos, retain)
	}
	p, err := sparkplug.Decode(payload)
	if err != nil {
		h.breach("message-flow-edge-node-birth-publish-nbirth-payload", "%s: %v", topic, err)
		return
	}
	if p.At.IsZero() {
		h.breach("payloads-"+strings.ToLower(f[2])+"-timestamp", "none")
	}
	h.sequence(kind, p.Seq)
	switch kind {
	case sparkplug.NBirth:
		h.nbirth(p)
	case sparkplug.DBirth:
		h.birth(device, p)
		h.alive[device] = true
	case sparkplug.DDeath:
		if !h.alive[device] {
			h.breach("operational-behavior-device-ddeath", "%s was not born", device)
		}
		delete(h.alive, device)
	case sparkplug.NData, sparkplug.DData:
		if ofDevice && !h.alive[device] {
			h.breach("payloads-dbirth-order", "data of %s before its birth", device)
		}
		h.data(device, p)
	default:
		h.breach("topic-structure", "%s from an edge node", kind)
	}
}

func (h *Host) sequence(kind sparkplug.Kind, seq int) {
	switch {
	case seq < 0:
		h.breach("payloads-sequence-num-always-included", "%s without", kind)
	case kind == sparkplug.NBirth && seq != 0:
		h.breach("topics-nbirth-seq-num", "%d", seq)
	case kind != sparkplug.NBirth && !h.online:
		h.breach("message-flow-device-birth-publish-nbirth-wait", "%s before NBIRTH", kind)
	case kind != sparkplug.NBirth && seq != (h.seq+1)%256:
		h.breach("payloads-sequence-num-incrementing", "%s with %d after %d", kind, seq, h.seq)
	}
	h.seq = seq
}

func (h *Host) nbirth(p *sparkplug.Heard) {
	h.Births++
	h.online = true
	h.named, h.alive, h.folded = map[uint64]name{}, map[string]bool{}, map[string]string{}
	h.Values = map[string]map[string]sparkplug.HeardMetric{}
	rebirth, bd := false, false
	for i := range p.Metrics {
		m := &p.Metrics[i]
		switch m.Name {
		case "bdSeq":
			bd, h.bdSeq = true, h.bdSeqOf(m)
			if h.bdSeq != h.will {
				h.breach("payloads-nbirth-bdseq-repeat", "%d, the will has %d", h.bdSeq, h.will)
			}
		case "Node Control/Rebirth":
			rebirth = true
			if m.Type != sparkplug.Boolean || m.Value != false {
				h.breach("operational-behavior-data-commands-rebirth-value", "%v of %v", m.Value, m.Type)
			}
			if m.HasAlias {
				h.breach("operational-behavior-data-commands-rebirth-name-aliases", "alias %d", m.Alias)
			}
		}
	}
	if !bd {
		h.breach("topics-nbirth-bdseq-included", "none")
	}
	if !rebirth {
		h.breach("topics-nbirth-rebirth-metric", "none")
	}
	h.birth("", p)
}

func (h *Host) birth(device string, p *sparkplug.Heard) {
	for a, n := range h.named { // a device is born anew
		if n.device == device && device != "" {
			delete(h.named, a)
		}
	}
	h.Values[device] = map[string]sparkplug.HeardMetric{}
	for i := range p.Metrics {
		m := p.Metrics[i]
		if m.Name == "" {
			h.breach("payloads-name-requirement", "metric %d of %q", i, device)
			continue
		}
		if m.Name != "Node Control/Rebirth" {
			if !m.HasAlias {
				h.breach("payloads-alias-birth-requirement", "%s", m.Name)
			}
			if was, twice := h.named[m.Alias]; twice {
				h.breach("payloads-alias-uniqueness", "%d is %v and %s", m.Alias, was, m.Name)
			}
			h.named[m.Alias] = name{device, m.Name, m.Type}
		}
		if m.Type == 0 || m.Type > 34 {
			h.breach("payloads-metric-datatype-req", "%s: %d", m.Name, m.Type)
		}
		if m.Historical {
			h.breach("operational-behavior-data-publish-nbirth-values", "%s is historical", m.Name)
		}
		low := device + "/" + strings.ToLower(m.Name)
		if other, there := h.folded[low]; there && other != m.Name {
			h.breach("case-sensitivity-metric-names", "%s and %s", other, m.Name)
		}
		h.folded[low] = m.Name
		if _, twice := h.Values[device][m.Name]; twice {
			h.breach("topics-nbirth-metrics", "%s stands twice", m.Name)
		}
		h.metric(&m, m.Type)
		h.Values[device][m.Name] = m
	}
}

// metric checks what holds in every message.
func (h *Host) metric(m *sparkplug.HeardMetric, typ sparkplug.Type) {
	if m.At.IsZero() || m.At.Year() < 1980 {
		h.breach("payloads-name-birth-data-requirement", "%s%d: no time", m.Name, m.Alias)
	}
	if m.Null != (m.Value == nil) || !m.Null && !fits(typ, m.Value) {
		h.breach("operational-behavior-data-publish-nbirth-values", "%s %d: %v (%T) as %v, null %v", m.Name, m.Alias, m.Value, m.Value, typ, m.Null)
	}
	for k, p := range m.Props {
		if p.Null != (p.Value == nil) || !p.Null && !fits(p.Type, p.Value) {
			h.breach("payloads-metric-propertyvalue-type-value", "%s of %s: %v (%T) as %v", k, m.Name, p.Value, p.Value, p.Type)
		}
		if k == "Quality" && (p.Type != sparkplug.Int32 || p.Value != uint32(0) && p.Value != uint32(192) && p.Value != uint32(500)) {
			h.breach("payloads-propertyset-quality-value-value", "%v", p.Value)
		}
	}
}

// fits tells whether a value stands in the field of its type (specification, section 6.4.17).
func fits(t sparkplug.Type, v any) bool {
	switch v.(type) {
	case uint32:
		return t >= 1 && t <= 7 && t != sparkplug.Int64
	case uint64:
		return t == sparkplug.Int64 || t == sparkplug.UInt64 || t == sparkplug.DateTime
	case float64:
		return t == sparkplug.Double
	case bool:
		return t == sparkplug.Boolean
	case string:
		return t == sparkplug.String || t == 14
	}
	return false
}

func (h *Host) data(device string, p *sparkplug.Heard) {
	if len(p.Metrics) == 0 {
		h.breach("topics-ndata-payload", "no metric")
	}
	for i := range p.Metrics {
		m := p.Metrics[i]
		if m.Name != "" || !m.HasAlias {
			h.breach("payloads-alias-data-cmd-requirement", "%s", m.Name)
			continue
		}
		n, known := h.named[m.Alias]
		if !known || n.device != device {
			h.breach("topics-nbirth-metric-reqs", "alias %d of %q was not born", m.Alias, device)
			continue
		}
		if m.Type != 0 {
			h.breach("payloads-metric-datatype-not-req", "%s", n.name)
		}
		h.metric(&m, n.typ)
		h.Stories = append(h.Stories, Story{device, n.name, m})
		if !m.Historical {
			m.Name, m.Type = n.name, n.typ
			h.Values[device][n.name] = m
		}
	}
}

// Alive tells whether a device is born and not dead; the node itself: device "".
func (h *Host) Alive(device string) bool {
	if device == "" {
		return h.online
	}
	return h.online && h.alive[device]
}
