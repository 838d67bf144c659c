package wire_test

import (
	"encoding/json"
	"errors"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

// One order of every verb as it must be; each fits the schema, and each is refused when a field that it needs is gone.
func TestOrdersThatAreRight(t *testing.T) {
	s := loadSchema(t, "order")
	good := map[string][]string{
		wire.VerbAcknowledge: {`"key":"t1.he.suction/leaking"`},
		wire.VerbReset:       {`"key":"t1.he.suction/leaking"`},
		wire.VerbShelve:      {`"key":"t1.he.suction/leaking"`, `"reason":"part ordered"`, `"for_s":28800`},
		wire.VerbUnshelve:    {`"key":"t1.he.suction/leaking"`},
		wire.VerbTakeOut:     {`"key":"t1.he.suction/leaking"`, `"reason":"gauge off"`},
		wire.VerbReturn:      {`"key":"t1.he.suction/leaking"`},
		wire.VerbCutClip:     {`"label":"odd noise"`, `"last_s":20`},
		wire.VerbLearnStart:  nil,
		wire.VerbLearnAccept: nil,
		wire.VerbLearnDrop:   nil,
		wire.VerbImport:      {`"reason":"new computer"`},
		wire.VerbRenew:       {`"subject":"t1.he.suction"`},
		wire.VerbRebirth:     nil,
	}
	if len(good) != len(wire.Verbs()) {
		t.Errorf("verbs %v", wire.Verbs())
	}
	for verb, fields := range good {
		fields = append([]string{`"verb":"` + verb + `"`, `"by":"A. Operator"`}, fields...)
		text := "{" + strings.Join(fields, ",") + "}"
		if err := s.check([]byte(text)); err != nil {
			t.Errorf("%s: %v", text, err)
		}
		o, err := wire.ParseOrder([]byte(text))
		if err == nil {
			err = o.Check()
		}
		if err != nil {
			t.Errorf("%s: %v", text, err)
		}
		for i := range fields {
			less := "{" + strings.Join(slices.Delete(slices.Clone(fields), i, i+1), ",") + "}"
			o, err := wire.ParseOrder([]byte(less))
			if err == nil {
				err = o.Check()
			}
			if !errors.Is(err, wire.ErrOrder) {
				t.Errorf("%s: %v", less, err)
			}
		}
	}
}

func TestOrdersThatAreWrong(t *testing.T) {
	at := time.Date(2030, 5, 1, 0, 0, 0, 0, time.UTC)
	for name, c := range map[string]struct {
		o    wire.Order
		want string
	}{
		"both ends":       {wire.Order{Verb: "shelve", Key: "k", By: "A", Reason: "r", ForS: 1, Until: at}, "either"},
		"negative":        {wire.Order{Verb: "shelve", Key: "k", By: "A", Reason: "r", ForS: -1}, "for_s"},
		"for ever":        {wire.Order{Verb: "shelve", Key: "k", By: "A", Reason: "r", ForS: 1e12}, "for_s"},
		"long name":       {wire.Order{Verb: "reset", Key: "k", By: strings.Repeat("é", 65)}, "by of 65 characters"},
		"long reason":     {wire.Order{Verb: "reset", Key: "k", By: "A", Reason: strings.Repeat("r", 501)}, "501"},
		"two lines":       {wire.Order{Verb: "reset", Key: "k", By: "A\nB"}, "one line"},
		"blank name":      {wire.Order{Verb: "reset", Key: "k", By: "  "}, "who gives it"},
		"blank reason":    {wire.Order{Verb: "shelve", Key: "k", By: "A", Reason: " ", ForS: 1}, "reason is not"},
		"clip of a day":   {wire.Order{Verb: "cut-clip", By: "A", Label: "l", From: at, To: at.Add(24 * time.Hour)}, "apart"},
		"half a clip":     {wire.Order{Verb: "cut-clip", By: "A", Label: "l", From: at}, "both"},
		"too many turns":  {wire.Order{Verb: "learn-start", By: "A", Turns: 2_000_000}, "turns"},
		"a foreign field": {wire.Order{Verb: "learn-drop", By: "A", Key: "k"}, "takes no key"},
	} {
		if err := c.o.Check(); !errors.Is(err, wire.ErrOrder) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", name, err, c.want)
		}
	}
}

// What was refused goes into the journal too, whatever it was: short, printable, and true to the schema.
func TestRefusedOrdersAreJournalled(t *testing.T) {
	s, receipt := loadSchema(t, "act"), loadSchema(t, "receipt")
	rapid.Check(t, func(rt *rapid.T) {
		text := rapid.OneOf(plain(), rapid.Just(""), rapid.Just(strings.Repeat("\x07é", 900)))
		o := wire.Order{Verb: text.Draw(rt, "verb"), Key: text.Draw(rt, "key"), Subject: text.Draw(rt, "subject"), By: text.Draw(rt, "by"), Reason: text.Draw(rt, "reason"), Label: text.Draw(rt, "label")}.Clean()
		act := alarm.Act{ID: rapid.Uint64().Draw(rt, "id"), At: time.Unix(1e9, 0), Verb: o.Verb, Key: o.Key, Subject: o.Subject, By: o.By, Reason: o.Reason, Via: "api", Said: "refused",
			Transitions: rapid.SampledFrom([][]uint64{nil, {4, 5}}).Draw(rt, "transitions")}
		a := wire.FromAct(&act)
		raw := fits(t, s, a)
		fits(t, receipt, wire.Receipt{Version: 1, Journal: "j", Act: a, Caution: wire.Caution})
		if len(raw) > 6000 {
			rt.Fatalf("%d bytes for a refused order", len(raw))
		}
	})
}

// Whatever comes in, an order that is read and passes Check fits the schema, and survives a round trip.
func FuzzParseOrder(f *testing.F) {
	for _, s := range []string{
		`{"verb":"acknowledge","key":"t1.he.suction/leaking","by":"A"}`, `{"verb":"shelve","key":"k","by":"A","reason":"r","for_s":1e3}`,
		`{"verb":"shelve","key":"k","by":"A","reason":"r","until":"2030-05-01T00:00:00Z"}`, `{"verb":"cut-clip","label":"x","last_s":1,"by":"A"}`,
		`{"verb":"learn-start","turns":600,"accept":true,"by":"A"}`, `{}`, `null`, `[]`, `{"verb":"acknowledge"}{}`, "\xff", `{"verb":"renew","subject":"t1","by":"\u0000"}`,
	} {
		f.Add([]byte(s))
	}
	s := loadSchema(f, "order")
	f.Fuzz(func(t *testing.T, raw []byte) {
		o, err := wire.ParseOrder(raw)
		if err != nil {
			if !errors.Is(err, wire.ErrOrder) {
				t.Fatalf("%v", err)
			}
			return
		}
		if o.Check() != nil {
			return
		}
		o.Until, o.From, o.To = o.Until.UTC(), o.From.UTC(), o.To.UTC()
		b, err := json.Marshal(o)
		if err != nil {
			t.Fatal(err)
		}
		if err := s.check(b); err != nil {
			t.Fatalf("%v\n%s", err, b)
		}
		again, err := wire.ParseOrder(b)
		if err != nil || again != o {
			t.Fatalf("%+v came back as %+v (%v)", o, again, err)
		}
	})
}
