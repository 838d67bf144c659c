package uplink

import (
	"encoding/json"
	"fmt"
	"io"
	"strings"

	"lapwing/internal/wire"
)

// Reader prints messages as a control room would read them: alarms in full, standing alarms when it joins, health
// when it changes, features only when asked. Repeats of an alarm (same skid and id) are dropped.
type Reader struct {
	W        io.Writer
	Root     string
	Features bool
	Evidence int // lines of evidence under an alarm; 0: all
	last     map[string]uint64
	health   map[string]string
}

// Show prints one message. What it cannot read it says so about; it never fails.
func (r *Reader) Show(m Received) {
	skid, part, rest := Part(r.Root, m.Topic)
	switch part {
	case "alarm":
		r.alarm(m, false)
	case "standing":
		if m.Retained && len(m.Payload) > 0 {
			r.alarm(m, true)
		}
	case "health":
		r.showHealth(skid, m)
	case "features":
		if r.Features {
			r.showFeatures(skid, rest, m)
		}
	default:
		fmt.Fprintf(r.W, "%s: %d bytes on a topic that this version does not know\n", m.Topic, len(m.Payload))
	}
}

// received is an alarm with its detail read back as a finding.
type received struct {
	wire.Alarm
	Detail *wire.Finding `json:"detail"`
}

func (r *Reader) alarm(m Received, standing bool) {
	var a received
	if err := json.Unmarshal(m.Payload, &a); err != nil {
		fmt.Fprintf(r.W, "%s: unreadable: %v\n", m.Topic, err)
		return
	}
	if r.last == nil {
		r.last = map[string]uint64{}
	}
	if !standing {
		if a.ID <= r.last[a.Skid] {
			return // sent again after a lost acknowledgement
		}
		r.last[a.Skid] = a.ID
	}
	head := fmt.Sprintf("%s → %s", a.From, a.To)
	if standing {
		head = "standing: " + a.To
	}
	if a.Test {
		head += " (TEST)"
	}
	fmt.Fprintf(r.W, "%s  %-8s  %s  #%d  %s  [%s]\n", a.At.UTC().Format("2006-01-02 15:04:05Z"), strings.ToUpper(a.Severity), a.Skid, a.ID, a.Key, head)
	fmt.Fprintf(r.W, "    %s\n", a.Sentence)
	if a.To == "normal" || a.Detail == nil {
		return
	}
	for i, e := range a.Detail.Evidence {
		if r.Evidence > 0 && i >= r.Evidence {
			fmt.Fprintf(r.W, "      and %d more\n", len(a.Detail.Evidence)-i)
			break
		}
		fmt.Fprintf(r.W, "      %-11s  %s\n", e.Class, e.Text)
	}
	if len(a.Detail.NotApart) > 0 {
		fmt.Fprintf(r.W, "    cannot be told from: %s\n", strings.Join(a.Detail.NotApart, ", "))
	}
	for _, s := range a.Detail.Settle {
		fmt.Fprintf(r.W, "    to settle it: %s\n", s)
	}
	for _, s := range a.Detail.Next {
		fmt.Fprintf(r.W, "    usual next:   %s\n", s)
	}
	if a.Clip != "" {
		fmt.Fprintf(r.W, "    raw samples protected as clip %s\n", a.Clip)
	}
	fmt.Fprintf(r.W, "    %s\n", a.Caution)
}

func (r *Reader) showHealth(skid string, m Received) {
	var h struct {
		State string `json:"state"`
		Line  string `json:"line"`
	}
	if err := json.Unmarshal(m.Payload, &h); err != nil {
		fmt.Fprintf(r.W, "%s: unreadable: %v\n", m.Topic, err)
		return
	}
	if r.health == nil {
		r.health = map[string]string{}
	}
	if now := h.State + " " + h.Line; r.health[skid] != now {
		r.health[skid] = now
		fmt.Fprintf(r.W, "health of %s: %s\n", skid, strings.TrimSpace(h.State+", "+h.Line))
	}
}

func (r *Reader) showFeatures(skid, throw string, m Received) {
	var f wire.Features
	if err := json.Unmarshal(m.Payload, &f); err != nil {
		fmt.Fprintf(r.W, "%s: unreadable: %v\n", m.Topic, err)
		return
	}
	n := 0
	for _, v := range f.Values {
		n += len(v)
	}
	fmt.Fprintf(r.W, "%s  features  %s/%s  turn %d, %.1f rpm, %s: %d values, %d absent\n", f.At.Format("15:04:05Z"), skid, throw, f.Turn, f.RPM, f.Duty, n, f.Absent)
}
