package wire

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"lapwing/internal/alarm"
)

// Order is what a person asks of the monitor: the body of POST /api/v1/orders and of an MQTT command. Schema: order.
// Which fields a verb needs and may have: see Verbs.
type Order struct {
	Verb    string    `json:"verb"`
	Key     string    `json:"key,omitempty"`     // alarm point, e.g. t1.he.suction/leaking
	Subject string    `json:"subject,omitempty"` // what is renewed, e.g. t1.he.suction
	By      string    `json:"by"`                // who gives it
	Reason  string    `json:"reason,omitempty"`  // why; for an acknowledgement a remark
	ForS    float64   `json:"for_s,omitempty"`   // s, how long a shelf lasts
	Until   time.Time `json:"until,omitzero"`    // or when it ends, UTC
	Turns   int       `json:"turns,omitempty"`   // steady turns of a learning run
	Add     bool      `json:"add,omitempty"`     // a learning run adds load steps to the baseline in force
	Auto    bool      `json:"accept,omitempty"`  // a learning run is accepted by itself at its end
	Label   string    `json:"label,omitempty"`   // of a clip that is cut by hand
	LastS   float64   `json:"last_s,omitempty"`  // s, how far back a clip goes from now
	From    time.Time `json:"from,omitzero"`     // or its bounds, UTC
	To      time.Time `json:"to,omitzero"`
	Via     string    `json:"-"` // the way it came: page, api, tool, mqtt; set by whoever took it in
}

// The verbs of orders.
const (
	VerbAcknowledge = "acknowledge"
	VerbReset       = "reset"
	VerbShelve      = "shelve"
	VerbUnshelve    = "unshelve"
	VerbTakeOut     = "out-of-service"
	VerbReturn      = "return-to-service"
	VerbCutClip     = "cut-clip"
	VerbLearnStart  = "learn-start"
	VerbLearnAccept = "learn-accept"
	VerbLearnDrop   = "learn-drop"
	VerbImport      = "baseline-import" // of a file that came with POST /api/v1/baselines
	VerbRenew       = "renew"
	VerbRebirth     = "rebirth" // health and standing alarms are sent to the control room again
)

// Bounds of what an order may hold.
const (
	MaxOrder  = 8 << 10 // bytes of its JSON
	maxName   = 64
	maxKey    = 200
	maxReason = 500
	maxTurns  = 1_000_000
	maxClip   = time.Hour
	maxFor    = 366 * 24 * time.Hour
)

// ErrOrder is wrapped by what is wrong with an order itself.
var ErrOrder = errors.New("order")

// verbFields are the fields beside verb and by: those needed, and those allowed as well. A field in neither is refused:
// an order that says more than is understood must not be carried out.
var verbFields = map[string]struct{ needs, may []string }{
	VerbAcknowledge: {[]string{"key"}, []string{"reason"}},
	VerbReset:       {[]string{"key"}, []string{"reason"}},
	VerbShelve:      {[]string{"key", "reason"}, []string{"for_s", "until"}},
	VerbUnshelve:    {[]string{"key"}, []string{"reason"}},
	VerbTakeOut:     {[]string{"key", "reason"}, nil},
	VerbReturn:      {[]string{"key"}, []string{"reason"}},
	VerbCutClip:     {[]string{"label"}, []string{"reason", "last_s", "from", "to"}},
	VerbLearnStart:  {nil, []string{"turns", "reason", "subject", "add", "accept"}},
	VerbLearnAccept: {nil, []string{"reason"}},
	VerbLearnDrop:   {nil, []string{"reason"}},
	VerbImport:      {[]string{"reason"}, nil},
	VerbRenew:       {[]string{"subject"}, []string{"reason", "turns", "accept"}},
	VerbRebirth:     {nil, []string{"reason"}},
}

// Verbs lists the verbs, in alphabetical order.
func Verbs() []string {
	var out []string
	for v := range verbFields {
		out = append(out, v)
	}
	return slices.Sorted(slices.Values(out))
}

// ParseOrder reads one order strictly: no unknown field, no second value, at most MaxOrder bytes. It does not check what
// the fields say; see Check.
func ParseOrder(raw []byte) (Order, error) {
	var o Order
	if err := strict(raw, &o); err != nil {
		return Order{}, err
	}
	return o, nil
}

func strict(raw []byte, v any) error {
	if len(raw) > MaxOrder {
		return fmt.Errorf("wire: %w of more than %d bytes", ErrOrder, MaxOrder)
	}
	if !utf8.Valid(raw) {
		return fmt.Errorf("wire: %w is not UTF-8", ErrOrder)
	}
	dec := json.NewDecoder(bytes.NewReader(raw))
	dec.DisallowUnknownFields()
	if err := dec.Decode(v); err != nil {
		return fmt.Errorf("wire: %w: %w", ErrOrder, err)
	}
	if _, err := dec.Token(); !errors.Is(err, io.EOF) {
		return fmt.Errorf("wire: %w: something stands behind it", ErrOrder)
	}
	return nil
}

// has tells which fields an order has.
func (o *Order) has() map[string]bool {
	return map[string]bool{"key": o.Key != "", "subject": o.Subject != "", "reason": o.Reason != "", "for_s": o.ForS != 0, "until": !o.Until.IsZero(),
		"turns": o.Turns != 0, "add": o.Add, "accept": o.Auto, "label": o.Label != "", "last_s": o.LastS != 0, "from": !o.From.IsZero(), "to": !o.To.IsZero()}
}

// Check says what an order lacks or has too much of, without regard to what is possible now.
func (o *Order) Check() error {
	bad := func(format string, a ...any) error {
		return fmt.Errorf("%w: %s", ErrOrder, fmt.Sprintf(format, a...))
	}
	f, known := verbFields[o.Verb]
	if !known {
		return bad("there is no verb %q; there are %s", clean(o.Verb, maxName), strings.Join(Verbs(), ", "))
	}
	if strings.TrimSpace(o.By) == "" {
		return bad("it does not say who gives it (by)")
	}
	for _, t := range []struct {
		name, text string
		most       int
	}{{"by", o.By, maxName}, {"key", o.Key, maxKey}, {"subject", o.Subject, maxKey}, {"label", o.Label, maxName}, {"reason", o.Reason, maxReason}} {
		if n := utf8.RuneCountInString(t.text); n > t.most {
			return bad("%s of %d characters, %d are allowed", t.name, n, t.most)
		}
		if t.text != "" && strings.TrimSpace(t.text) == "" || strings.ContainsFunc(t.text, unicode.IsControl) || !utf8.ValidString(t.text) {
			return bad("%s is not one line of text", t.name)
		}
	}
	has := o.has()
	for _, n := range f.needs {
		if !has[n] {
			return bad("%s needs %s", o.Verb, n)
		}
	}
	for _, n := range []string{"key", "subject", "reason", "for_s", "until", "turns", "add", "accept", "label", "last_s", "from", "to"} {
		if has[n] && !slices.Contains(f.needs, n) && !slices.Contains(f.may, n) {
			return bad("%s takes no %s", o.Verb, n)
		}
	}
	switch {
	case o.Verb == VerbShelve && has["for_s"] == has["until"]:
		return bad("shelve needs either for_s or until")
	case !(o.ForS >= 0 && o.ForS <= maxFor.Seconds()):
		return bad("for_s of %g s", o.ForS)
	case o.Turns < 0 || o.Turns > maxTurns:
		return bad("turns of %d, 1 to %d are allowed", o.Turns, maxTurns)
	case o.Verb == VerbCutClip && (has["last_s"] == has["from"] || has["from"] != has["to"]):
		return bad("cut-clip needs either last_s or both from and to")
	case !(o.LastS >= 0 && o.LastS <= maxClip.Seconds()):
		return bad("last_s of %g s, at most %g", o.LastS, maxClip.Seconds())
	case has["from"] && (!o.To.After(o.From) || o.To.Sub(o.From) > maxClip):
		return bad("from and to must be in this order and at most %s apart", maxClip)
	}
	return nil
}

// clean cuts a text down to what may stand in a journal.
func clean(s string, most int) string {
	s = strings.Map(func(r rune) rune {
		if unicode.IsControl(r) || r == utf8.RuneError {
			return '?'
		}
		return r
	}, s)
	if r := []rune(s); len(r) > most {
		return string(r[:most]) + "…"
	}
	return s
}

// Clean gives the order with every text short and printable, for the journal of refused ones.
func (o Order) Clean() Order {
	o.Verb, o.Key, o.Subject = clean(o.Verb, maxName), clean(o.Key, maxKey), clean(o.Subject, maxKey)
	o.By, o.Reason, o.Label = clean(o.By, maxName), clean(o.Reason, maxReason), clean(o.Label, maxName)
	return o
}

// Act is one order with what became of it: the answer to it, and its record in the journal. Schema: act.
type Act struct {
	Type        string    `json:"type"` // "act"
	ID          uint64    `json:"id"`   // from 1, apart from the transitions' ids
	At          time.Time `json:"at,omitzero"`
	Verb        string    `json:"verb"`
	Key         string    `json:"key,omitempty"`
	Subject     string    `json:"subject,omitempty"`
	By          string    `json:"by"`
	Reason      string    `json:"reason,omitempty"`
	Via         string    `json:"via"`
	Accepted    bool      `json:"accepted"`
	Said        string    `json:"said"`                  // what was done, or why it was refused
	Transitions []uint64  `json:"transitions,omitempty"` // ids of the alarm transitions it made
	Clip        string    `json:"clip,omitempty"`
}

// Receipt is the answer to an order.
type Receipt struct {
	Version int    `json:"v"`
	Request string `json:"request,omitempty"` // of the command, when the order came over MQTT
	Journal string `json:"journal,omitempty"`
	Act
	OnDisk  bool   `json:"on_disk"` // false: done, but lost if the daemon stops before the disk takes it
	Caution string `json:"caution"`
}

// FromAct puts an act into its outside form.
func FromAct(a *alarm.Act) Act {
	return Act{Type: "act", ID: a.ID, At: a.At.UTC(), Verb: a.Verb, Key: a.Key, Subject: a.Subject, By: a.By, Reason: a.Reason, Via: a.Via,
		Accepted: a.Accepted, Said: a.Said, Transitions: a.Transitions, Clip: a.Clip}
}
