package wire_test

import (
	"encoding/json"
	"errors"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/wire"
)

func TestCommands(t *testing.T) {
	s := loadSchema(t, "command")
	for _, v := range wire.CommandVerbs() {
		if !slices.Contains(wire.Verbs(), v) {
			t.Errorf("%s is no verb", v)
		}
	}
	for _, c := range []struct {
		text, request, want string
	}{
		{`{"request":"1","verb":"acknowledge","key":"t1.he.suction/leaking","by":"A"}`, "1", ""},
		{`{"request":"r-2","verb":"cut-clip","label":"odd noise","last_s":20,"by":"A"}`, "r-2", ""},
		{`{"verb":"rebirth","by":"A"}`, "", "no request"},
		{`{"request":" ","verb":"rebirth","by":"A"}`, " ", "no request"},
		{`{"request":"a\u0007b","verb":"rebirth","by":"A"}`, "a?b", "one line"},
		{`{"request":"` + strings.Repeat("é", 65) + `","verb":"rebirth","by":"A"}`, strings.Repeat("é", 64) + "…", "65 characters"},
		{`{"request":"3","verb":"rebirth","by":"A","extra":1}`, "3", "unknown field"},
		{`{"request":"4","verb":"rebirth","by":"A"} {}`, "4", "behind it"},
		{`{"request":"5"` + strings.Repeat(" ", wire.MaxOrder) + `}`, "", "more than"},
		{"\xff", "", "UTF-8"},
	} {
		got, err := wire.ParseCommand([]byte(c.text))
		if got.Request != c.request {
			t.Errorf("%.80s: request %q, want %q", c.text, got.Request, c.request)
		}
		if c.want == "" {
			if err != nil || got.Check() != nil || s.check([]byte(c.text)) != nil {
				t.Errorf("%.80s: %v, %v, schema %v", c.text, err, got.Check(), s.check([]byte(c.text)))
			}
			continue
		}
		if !errors.Is(err, wire.ErrOrder) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%.80s: %v, want %q", c.text, err, c.want)
		}
	}
}

// Whatever comes in, a command that may be carried out fits the schema.
func FuzzParseCommand(f *testing.F) {
	for _, s := range []string{
		`{"request":"1","verb":"acknowledge","key":"t1.he.suction/leaking","by":"A"}`, `{"request":"2","verb":"shelve","key":"k","by":"A","reason":"r","for_s":1e3}`,
		`{"request":"3","verb":"cut-clip","label":"x","last_s":1,"by":"A"}`, `{"request":null}`, `{"request":"1","request":"2","verb":"rebirth","by":"A"}`, `[]`, `null`, "\xff",
	} {
		f.Add([]byte(s))
	}
	s := loadSchema(f, "command")
	f.Fuzz(func(t *testing.T, raw []byte) {
		c, err := wire.ParseCommand(raw)
		if err != nil {
			if !errors.Is(err, wire.ErrOrder) {
				t.Fatalf("%v", err)
			}
			return
		}
		if c.Check() != nil || !slices.Contains(wire.CommandVerbs(), c.Verb) {
			return
		}
		c.Until, c.From, c.To = c.Until.UTC(), c.From.UTC(), c.To.UTC()
		b, err := json.Marshal(c)
		if err != nil {
			t.Fatal(err)
		}
		if err := s.check(b); err != nil {
			t.Fatalf("%v\n%s", err, b)
		}
	})
}
