package uplink

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strings"
	"unicode"

	"lapwing/internal/wire"
)

// Reader prints messages as a control room would read them: alarms in full, standing alarms when it joins, health
// when it changes, features only when asked. Repeats of an alarm are dropped; a gap in the numbers and a journal that
// began anew are said. It prints nothing that could act on a terminal.
type Reader struct {
	W        io.Writer
	Root     string
	Features bool
	Evidence int // lines of evidence under an alarm; 0: all
	seen     map[string]*memory
	health   map[string]string
	standing map[string]string
}

const (
	maxPayload = 1 << 20 // an alarm with its evidence has a few kilobytes
	maxSkids   = 4096    // remembered; beyond it all is forgotten and shown anew
)

// Show prints one message. What it cannot read it says so about; it never fails.
func (r *Reader) Show(m Received) {
	skid, part, rest := Part(r.Root, m.Topic)
	if len(m.Payload) > maxPayload {
		r.say("%s: %d bytes are too many for any message that this version knows\n", m.Topic, len(m.Payload))
		return
	}
	switch part {
	case "alarm":
		r.alarm(skid, m)
	case "standing":
		r.showStanding(skid, m)
	case "health":
		r.showHealth(skid, m)
	case "features":
		if r.Features {
			r.showFeatures(skid, rest, m)
		}
	case "receipt":
		r.showReceipt(skid, m)
	case "command":
	default:
		r.say("%s: %d bytes on a topic that this version does not know\n", m.Topic, len(m.Payload))
	}
}

// say prints with every text made plain.
func (r *Reader) say(format string, args ...any) {
	for i, a := range args {
		switch x := a.(type) {
		case string:
			args[i] = plain(x)
		case error:
			args[i] = plain(x.Error())
		}
	}
	fmt.Fprintf(r.W, format, args...)
}

func (r *Reader) unreadable(m Received, err error) {
	var kind *json.UnmarshalTypeError
	if errors.As(err, &kind) {
		where := kind.Field
		if where == "" {
			where = "the whole of it"
		}
		r.say("%s: unreadable: %s is of the kind %s, which does not belong there\n", m.Topic, where, kind.Value)
		return
	}
	r.say("%s: unreadable: %v\n", m.Topic, err)
}

// plain keeps control and formatting characters from a terminal.
func plain(s string) string {
	return strings.Map(func(c rune) rune {
		switch {
		case unicode.IsPrint(c):
			return c
		case unicode.IsSpace(c):
			return ' '
		}
		return '?'
	}, s)
}

// received is an alarm whose detail is read apart: one that cannot be read must not hide the alarm.
type received struct {
	wire.Alarm
	Detail json.RawMessage `json:"detail"`
}

func (r *Reader) read(m Received) (a received, ok bool) {
	switch err := json.Unmarshal(m.Payload, &a); {
	case err != nil:
		r.unreadable(m, err)
		return a, false
	case a.Key == "" || a.To == "":
		r.say("%s: unreadable: no alarm in it\n", m.Topic)
		return a, false
	}
	return a, true
}

func (r *Reader) alarm(skid string, m Received) {
	a, ok := r.read(m)
	if !ok {
		return
	}
	if r.seen == nil || len(r.seen) > maxSkids {
		r.seen = map[string]*memory{}
	}
	mem := r.seen[skid]
	if mem == nil {
		mem = &memory{}
		r.seen[skid] = mem
	}
	show, why := mem.take(mark{a.Journal, a.ID, a.At.UnixNano()})
	if !show {
		return // sent again after a lost acknowledgement
	}
	if why != "" {
		r.say("%s: %s\n", skid, why)
	}
	head := a.From + " → " + a.To
	if a.From == a.To && a.Was != "" && a.Was != a.Severity {
		head = a.To + ", was " + a.Was
	}
	r.print(skid, a, head)
}

func (r *Reader) showStanding(skid string, m Received) {
	if len(m.Payload) == 0 {
		return // the transition itself has been shown, or will be
	}
	if !m.Retained {
		// The transition itself has been shown; only evidence that has been renewed since is news, in one line.
		if a, ok := r.read(m); ok && !a.Renewed.IsZero() {
			valve := ""
			var f wire.Finding
			if json.Unmarshal(a.Detail, &f) == nil && f.Valve != "" {
				valve = " (valve " + f.Valve + ")"
			}
			r.say("%s  renewed   %s  %s%s: %s\n", a.Renewed.UTC().Format("2006-01-02 15:04:05Z"), skid, a.Key, valve, a.Sentence)
		}
		return
	}
	if r.standing == nil || len(r.standing) > maxSkids {
		r.standing = map[string]string{}
	}
	if r.standing[m.Topic] == string(m.Payload) {
		return // joined again and nothing has changed
	}
	if a, ok := r.read(m); ok {
		r.standing[m.Topic] = string(m.Payload)
		r.print(skid, a, "standing: "+a.To)
	}
}

func (r *Reader) print(skid string, a received, head string) {
	if a.Version != 1 {
		r.say("%s: a message of version %d, this program reads version 1: look for what is missing below\n", skid, a.Version)
	}
	if a.Skid != skid {
		r.say("%s: the message under this skid's topic says that it is of skid %s\n", skid, a.Skid)
	}
	if a.Order == 1 {
		head += ", first up"
	} else if a.Order > 1 {
		head += fmt.Sprintf(", up as number %d", a.Order)
	}
	if a.Test {
		head += " (TEST)"
	}
	sev := strings.ToUpper(a.Severity)
	if a.To == "normal" {
		sev = "normal"
	}
	when, number := "time not given", ""
	if !a.At.IsZero() {
		when = a.At.UTC().Format("2006-01-02 15:04:05Z")
	}
	if a.ID != 0 {
		number = fmt.Sprintf("  #%d", a.ID)
	}
	r.say("%s  %-8s  %s%s  %s  [%s]\n", when, sev, skid, number, a.Key, head)
	r.say("    %s\n", a.Sentence)
	if a.Flood {
		r.say("    more alarms come in than a person can follow\n")
	}
	if a.By != "" || a.Note != "" {
		r.say("    %s\n", strings.TrimSpace(strings.TrimPrefix(a.By+": "+a.Note, ": ")))
	}
	if a.To == "normal" {
		return
	}
	r.detail(a.Detail)
	if a.Clip != "" {
		r.say("    raw samples protected as clip %s\n", a.Clip)
	}
	r.say("    %s\n", a.Caution)
}

func (r *Reader) detail(raw json.RawMessage) {
	var f wire.Finding
	if len(raw) == 0 || json.Unmarshal(raw, &f) != nil {
		return
	}
	for i, e := range f.Evidence {
		if r.Evidence > 0 && i >= r.Evidence {
			r.say("      and %d more\n", len(f.Evidence)-i)
			break
		}
		r.say("      %-11s  %s\n", e.Class, e.Text)
	}
	if len(f.NotApart) > 0 {
		r.say("    cannot be told from: %s\n", strings.Join(f.NotApart, ", "))
	}
	for _, s := range f.Settle {
		r.say("    to settle it: %s\n", s)
	}
	for _, s := range f.Next {
		r.say("    usual next:   %s\n", s)
	}
}

func (r *Reader) showHealth(skid string, m Received) {
	if len(m.Payload) == 0 {
		return
	}
	var h struct {
		State   string   `json:"state"`
		Line    string   `json:"line"`
		Trouble []string `json:"trouble"`
	}
	if err := json.Unmarshal(m.Payload, &h); err != nil {
		r.unreadable(m, err)
		return
	}
	if r.health == nil || len(r.health) > maxSkids {
		r.health = map[string]string{}
	}
	now := strings.Map(func(c rune) rune { // a count that runs is no change
		if unicode.IsDigit(c) {
			return -1
		}
		return c
	}, strings.Join(append([]string{h.State, h.Line}, h.Trouble...), "\n"))
	if last, known := r.health[skid]; known && last == now {
		return
	}
	r.health[skid] = now
	r.say("health of %s: %s\n", skid, strings.Trim(h.State+", "+h.Line, ", "))
	for _, t := range h.Trouble {
		r.say("    look at: %s\n", t)
	}
}

func (r *Reader) showFeatures(skid, throw string, m Received) {
	var f wire.Features
	if err := json.Unmarshal(m.Payload, &f); err != nil {
		r.unreadable(m, err)
		return
	}
	n := 0
	for _, v := range f.Values {
		n += len(v)
	}
	speed := "speed not known"
	if f.RPM != nil {
		speed = fmt.Sprintf("%.1f rpm", *f.RPM)
	}
	r.say("%s  features  %s/%s  turn %d, %s, %s: %d values, %d absent\n", f.At.UTC().Format("15:04:05Z"), skid, throw, f.Turn, speed, f.Duty, n, f.Absent)
}
