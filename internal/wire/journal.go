package wire

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/alarm"
)

// Entry is one record of the journal as it is listed and exported: a transition of an alarm point, or an act of a
// person. Schema: entry.
type Entry struct {
	Type    string    `json:"type"` // transition, act
	ID      uint64    `json:"id"`   // transitions and acts count apart
	At      time.Time `json:"at,omitzero"`
	Key     string    `json:"key,omitempty"`
	Subject string    `json:"subject,omitempty"`
	Kind    string    `json:"kind,omitempty"`

	// Of a transition.
	From     string `json:"from,omitempty"`
	To       string `json:"to,omitempty"`
	Severity string `json:"severity,omitempty"`
	Was      string `json:"was,omitempty"`
	Turn     *int64 `json:"turn,omitempty"`
	Sentence string `json:"sentence,omitempty"`
	Order    int    `json:"first_up_order,omitempty"`
	Flood    bool   `json:"flood,omitempty"`
	Detail   any    `json:"detail,omitempty"` // when asked for

	// Of an act.
	Verb        string   `json:"verb,omitempty"`
	Via         string   `json:"via,omitempty"`
	Accepted    *bool    `json:"accepted,omitempty"`
	Transitions []uint64 `json:"transitions,omitempty"`
	Clip        string   `json:"clip,omitempty"`

	By   string `json:"by,omitempty"`
	Note string `json:"note,omitempty"` // why, in people's words; what was said to it
	Said string `json:"said,omitempty"`
}

// FromJournal puts a transition into the form of a listed entry.
func FromJournal(t *alarm.Transition) Entry {
	turn := t.Turn
	return Entry{Type: "transition", ID: t.ID, At: t.At.UTC(), Key: t.Key, Subject: t.Subject, Kind: t.Kind, From: t.From.String(), To: t.To.String(),
		Severity: t.Severity.String(), Was: t.Was.String(), Turn: &turn, Sentence: t.Sentence, Order: t.Order, Flood: t.Flood, Detail: t.Detail, By: t.By, Note: t.Note}
}

// ActEntry puts an act into the form of a listed entry. Its subject is that of the alarm point it was about.
func ActEntry(a *alarm.Act) Entry {
	e := Entry{Type: "act", ID: a.ID, At: a.At.UTC(), Key: a.Key, Subject: a.Subject, Verb: a.Verb, Via: a.Via, Accepted: &a.Accepted, Transitions: a.Transitions,
		Clip: a.Clip, By: a.By, Note: a.Reason, Said: a.Said}
	if subject, kind, ok := strings.Cut(a.Key, "/"); ok && e.Subject == "" {
		e.Subject, e.Kind = subject, kind
	}
	return e
}

// JournalPage is a piece of the journal: GET /api/v1/journal.
type JournalPage struct {
	Version int     `json:"v"`
	Skid    string  `json:"skid"`
	Journal string  `json:"journal"` // names it: ids count within it
	Entries []Entry `json:"entries"`
	Next    string  `json:"next,omitempty"`   // page to ask for next; absent at the end
	Unread  string  `json:"unread,omitempty"` // records that cannot be read, and why
}

// JournalFilter says which entries are asked for. The zero value asks for all of them, newest first.
type JournalFilter struct {
	From, To time.Time // At, From included and To not; zero: no bound
	Subject  string    // this subject and what is part of it: t1 finds t1.he.suction
	Key      string
	Kind     string
	Severity alarm.Severity // this one or worse, of a transition now or before
	Type     string         // transition, act
	Verb     string         // of acts
	By       string
	Oldest   bool   // oldest first
	Details  bool   // with the evidence behind each transition
	Limit    int    // entries a page; default 100
	Page     string // as JournalPage.Next gave it
}

// MaxPage is the most entries that a page may have.
const MaxPage = 1000

var filterNames = []string{"from", "to", "subject", "key", "kind", "severity", "type", "verb", "by", "order", "detail", "limit", "page", "format"}

// ParseJournalFilter reads a query strictly: what is not understood must not look as if it had been filtered by.
func ParseJournalFilter(q url.Values) (f JournalFilter, err error) {
	for name, vals := range q {
		if !slices.Contains(filterNames, name) {
			return f, fmt.Errorf("wire: journal: no filter %q; there are %s", clean(name, maxName), strings.Join(filterNames, ", "))
		}
		if len(vals) != 1 {
			return f, fmt.Errorf("wire: journal: %s stands %d times", name, len(vals))
		}
	}
	f = JournalFilter{Subject: q.Get("subject"), Key: q.Get("key"), Kind: q.Get("kind"), Type: q.Get("type"), Verb: q.Get("verb"), By: q.Get("by"), Page: q.Get("page"), Limit: 100}
	for _, t := range []struct {
		name string
		to   *time.Time
	}{{"from", &f.From}, {"to", &f.To}} {
		if s := q.Get(t.name); s != "" {
			if *t.to, err = time.Parse(time.RFC3339, s); err != nil {
				return f, fmt.Errorf("wire: journal: %s %q: write 2030-05-01T06:00:00Z", t.name, clean(s, maxName))
			}
		}
	}
	if s := q.Get("severity"); s != "" {
		if err := f.Severity.UnmarshalText([]byte(s)); err != nil {
			return f, fmt.Errorf("wire: journal: severity %q: write advisory, alert or danger", clean(s, maxName))
		}
	}
	one := func(name string, allowed ...string) string {
		s := q.Get(name)
		if s != "" && !slices.Contains(allowed, s) && err == nil {
			err = fmt.Errorf("wire: journal: %s %q: write %s", name, clean(s, maxName), strings.Join(allowed, " or "))
		}
		return s
	}
	one("type", "transition", "act")
	one("format", "json", "jsonl", "csv")
	f.Oldest = one("order", "newest", "oldest") == "oldest"
	f.Details = one("detail", "yes", "no") == "yes"
	if err != nil {
		return f, err
	}
	if s := q.Get("limit"); s != "" {
		if f.Limit, err = strconv.Atoi(s); err != nil || f.Limit < 1 || f.Limit > MaxPage {
			return f, fmt.Errorf("wire: journal: limit %q: 1 to %d", clean(s, maxName), MaxPage)
		}
	}
	return f, nil
}

// Query writes the filter as ParseJournalFilter reads it.
func (f *JournalFilter) Query() url.Values {
	q := url.Values{}
	put := func(name, s string) {
		if s != "" {
			q.Set(name, s)
		}
	}
	put("subject", f.Subject)
	put("key", f.Key)
	put("kind", f.Kind)
	put("type", f.Type)
	put("verb", f.Verb)
	put("by", f.By)
	put("page", f.Page)
	if !f.From.IsZero() {
		q.Set("from", f.From.UTC().Format(time.RFC3339))
	}
	if !f.To.IsZero() {
		q.Set("to", f.To.UTC().Format(time.RFC3339))
	}
	if f.Severity > alarm.NoSeverity {
		q.Set("severity", f.Severity.String())
	}
	if f.Oldest {
		q.Set("order", "oldest")
	}
	if f.Details {
		q.Set("detail", "yes")
	}
	if f.Limit > 0 {
		q.Set("limit", strconv.Itoa(f.Limit))
	}
	return q
}

// Keeps tells whether an entry is asked for.
func (f *JournalFilter) Keeps(e *Entry) bool {
	within := func(s, whole string) bool {
		return whole == "" || s == whole || strings.HasPrefix(s, whole+".") || strings.HasPrefix(s, whole+"/")
	}
	switch {
	case !f.From.IsZero() && e.At.Before(f.From), !f.To.IsZero() && !e.At.Before(f.To):
		return false
	case f.Type != "" && e.Type != f.Type, f.Verb != "" && e.Verb != f.Verb, f.By != "" && e.By != f.By, f.Kind != "" && e.Kind != f.Kind, f.Key != "" && e.Key != f.Key:
		return false
	case !within(e.Subject, f.Subject):
		return false
	}
	return f.Severity == alarm.NoSeverity || worst(e) >= f.Severity
}

// worst is the severity of a transition now or before; an act has none.
func worst(e *Entry) (out alarm.Severity) {
	for _, s := range []string{e.Severity, e.Was} {
		var sev alarm.Severity
		if sev.UnmarshalText([]byte(s)) == nil {
			out = max(out, sev)
		}
	}
	return out
}

// JournalColumns are the columns of an exported journal, in order.
var JournalColumns = []string{"type", "id", "at", "key", "subject", "kind", "from", "to", "severity", "was", "turn", "sentence", "first_up_order", "flood",
	"verb", "via", "accepted", "transitions", "clip", "by", "note", "said"}

// WriteCSV appends entries to a table, without the heading and without details.
func WriteCSV(w *csv.Writer, entries []Entry) error {
	for i := range entries {
		e := &entries[i]
		at, turn, accepted, order, flood := "", "", "", "", ""
		if !e.At.IsZero() {
			at = e.At.UTC().Format(time.RFC3339Nano)
		}
		if e.Turn != nil {
			turn = strconv.FormatInt(*e.Turn, 10)
		}
		if e.Accepted != nil {
			accepted = strconv.FormatBool(*e.Accepted)
		}
		if e.Order > 0 {
			order = strconv.Itoa(e.Order)
		}
		if e.Flood {
			flood = "true"
		}
		var ids []string
		for _, id := range e.Transitions {
			ids = append(ids, strconv.FormatUint(id, 10))
		}
		row := []string{e.Type, strconv.FormatUint(e.ID, 10), at, e.Key, e.Subject, e.Kind, e.From, e.To, e.Severity, e.Was, turn, e.Sentence, order, flood,
			e.Verb, e.Via, accepted, strings.Join(ids, " "), e.Clip, e.By, e.Note, e.Said}
		for k := range row {
			row[k] = inert(row[k])
		}
		if err := w.Write(row); err != nil {
			return err
		}
	}
	return nil
}

// inert keeps a spreadsheet from taking a person's text for a formula.
func inert(s string) string {
	if s != "" && strings.ContainsRune("=+-@\t\r", rune(s[0])) {
		return "'" + s
	}
	return s
}

// WriteLines writes entries as JSON, one a line.
func WriteLines(w io.Writer, entries []Entry) error {
	for i := range entries {
		b, err := json.Marshal(&entries[i])
		if err != nil {
			return err
		}
		if _, err := w.Write(append(b, '\n')); err != nil {
			return err
		}
	}
	return nil
}
