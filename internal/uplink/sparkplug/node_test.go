package sparkplug_test

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/uplink/sparkplug/sparkplugtest"
)

var noon = time.Date(2030, 5, 1, 12, 0, 0, 0, time.UTC)

func node(t testing.TB, devices ...string) *sparkplug.Node {
	t.Helper()
	n, err := sparkplug.NewNode("compressors", "heron-meadow", devices...)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func tell(h *sparkplugtest.Host, ms []sparkplug.Message) {
	for _, m := range ms {
		h.Hear(m.Topic, 0, false, m.Payload)
	}
}

// Whatever is set, buried, raised and asked for in whatever order, over whatever reconnects: no rule of the
// specification is broken, and the host's present values are the node's.
func TestNoRuleIsBroken(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n, h := node(t, "t1", "t2"), sparkplugtest.New("compressors", "heron-meadow")
		n.Define("", sparkplug.Metric{Name: "Health/state", Type: sparkplug.String})
		n.Define("t1", sparkplug.Metric{Name: "Measures/he/leak_pct", Type: sparkplug.Double})
		devices := []string{"", "t1", "t2"}
		truth := map[string]map[string]any{"": {}, "t1": {}, "t2": {}}
		told := 0 // historical ones that a living host must hear
		bdSeq, now := uint8(rapid.IntRange(250, 255).Draw(rt, "bdSeq")), noon
		connect := func() {
			w := n.Will(bdSeq, now)
			h.Connect(w.Topic, 1, false, w.Payload)
			bdSeq++
		}
		connect()
		tell(h, n.Birth(now))
		for range rapid.IntRange(1, 400).Draw(rt, "steps") {
			now = now.Add(time.Second)
			d := rapid.SampledFrom(devices).Draw(rt, "device")
			switch rapid.IntRange(0, 19).Draw(rt, "what") {
			case 0:
				n.End()
				connect()
			case 1:
				tell(h, n.Birth(now))
			case 2:
				tell(h, n.Bury(d, now))
			case 3:
				tell(h, n.Raise(d, now))
			case 4:
				if n.Born() { // who was not born does not die
					h.Hear(n.Topic(sparkplug.NDeath, ""), 1, false, n.Death(now).Payload)
				}
				n.End()
				connect()
				tell(h, n.Birth(now))
			case 5:
				m := sparkplug.Metric{Name: "Alarms/" + rapid.SampledFrom([]string{"a", "b"}).Draw(rt, "key"), Type: sparkplug.Int32, Value: int32(1), At: now.Add(-time.Hour), Historical: true}
				tell(h, n.Set("", []sparkplug.Metric{m}, now))
				if n.Born() {
					told++
				}
			default:
				var ms []sparkplug.Metric
				for range rapid.IntRange(0, 3).Draw(rt, "n") {
					m := draw(rt)
					if rapid.Bool().Draw(rt, "dated") {
						m.At = now
					}
					ms = append(ms, m)
					truth[d][m.Name] = m.Value
				}
				tell(h, n.Set(d, ms, now))
			}
			if len(h.Breaches) > 0 {
				rt.Fatal(strings.Join(h.Breaches, "\n"))
			}
		}
		tell(h, n.Raise("t1", now))
		tell(h, n.Raise("t2", now))
		tell(h, n.Birth(now))
		if len(h.Breaches) > 0 {
			rt.Fatal(strings.Join(h.Breaches, "\n"))
		}
		for d, vals := range truth {
			for name, v := range vals {
				got, there := h.Values[d][name]
				if !there || !same(v, got.Value) {
					rt.Fatalf("%s %s is %v, the host has %v (%v)", d, name, v, got.Value, there)
				}
			}
		}
		old := 0
		for _, s := range h.Stories {
			if s.Historical {
				old++
			}
		}
		if old != told {
			rt.Fatalf("%d historical values said, %d heard", told, old)
		}
	})
}

func draw(rt *rapid.T) sparkplug.Metric {
	name := rapid.SampledFrom([]string{"x", "folder/y", "z"}).Draw(rt, "name")
	switch rapid.IntRange(0, 6).Draw(rt, "type") {
	case 0:
		return sparkplug.Metric{Name: name + "_d", Type: sparkplug.Double, Value: rapid.Float64Range(-1e9, 1e9).Draw(rt, "v")}
	case 1:
		return sparkplug.Metric{Name: name + "_i", Type: sparkplug.Int32, Value: rapid.Int32().Draw(rt, "v")}
	case 2:
		return sparkplug.Metric{Name: name + "_l", Type: sparkplug.Int64, Value: rapid.Int64().Draw(rt, "v")}
	case 3:
		return sparkplug.Metric{Name: name + "_b", Type: sparkplug.Boolean, Value: rapid.Bool().Draw(rt, "v")}
	case 4:
		return sparkplug.Metric{Name: name + "_s", Type: sparkplug.String, Value: rapid.StringMatching(`[a-z ä°]{0,8}`).Draw(rt, "v"),
			Props: []sparkplug.Property{{Key: "id", Type: sparkplug.UInt64, Value: rapid.Uint64().Draw(rt, "id")}, {Key: "why", Type: sparkplug.String}}}
	case 5:
		return sparkplug.Metric{Name: name + "_d", Type: sparkplug.Double}
	}
	return sparkplug.Metric{Name: name + "_e", Type: sparkplug.Double, Value: float64(rapid.IntRange(0, 1).Draw(rt, "v"))}
}

// same compares a value with what its field of the payload holds.
func same(want, got any) bool {
	switch x := want.(type) {
	case int32:
		return got == uint32(x)
	case int64:
		return got == uint64(x)
	}
	return got == want
}

// Only what has changed is said, and what is not known is null.
func TestOnlyChangesAreSaid(t *testing.T) {
	n, h := node(t, "t1"), sparkplugtest.New("compressors", "heron-meadow")
	w := n.Will(0, noon)
	h.Connect(w.Topic, 1, false, w.Payload)
	n.Define("t1", sparkplug.Metric{Name: "a", Type: sparkplug.Double}, sparkplug.Metric{Name: "b", Type: sparkplug.Double})
	ms := func(a, b any) []sparkplug.Metric {
		return []sparkplug.Metric{{Name: "a", Type: sparkplug.Double, Value: a, At: noon}, {Name: "b", Type: sparkplug.Double, Value: b, At: noon}}
	}
	if out := n.Set("t1", ms(1., nil), noon); out != nil {
		t.Fatalf("said before the birth: %v", out)
	}
	tell(h, n.Birth(noon))
	if v := h.Values["t1"]; v["a"].Value != 1. || !v["b"].Null {
		t.Errorf("born with %+v", v)
	}
	for _, c := range []struct {
		a, b any
		say  []string
	}{{1., nil, nil}, {2., nil, []string{"a"}}, {2., 5., []string{"b"}}, {nil, 5., []string{"a"}}, {math.NaN(), 6., []string{"a", "b"}}} {
		h.Stories = nil
		tell(h, n.Set("t1", ms(c.a, c.b), noon))
		var got []string
		for _, s := range h.Stories {
			got = append(got, s.Name)
		}
		if !slices.Equal(got, c.say) {
			t.Errorf("a %v, b %v: said %v, want %v", c.a, c.b, got, c.say)
		}
	}
	if !h.Values["t1"]["a"].Null {
		t.Errorf("a is no number and came as %+v", h.Values["t1"]["a"])
	}
	if n.Set("t9", ms(1., 1.), noon) != nil || n.Bury("t9", noon) != nil || n.Raise("t9", noon) != nil {
		t.Error("a device that is not there said something")
	}
	if len(h.Breaches) > 0 {
		t.Error(strings.Join(h.Breaches, "\n"))
	}
}

// A historical value never becomes the present one, not even under a name that is new.
func TestHistory(t *testing.T) {
	n, h := node(t), sparkplugtest.New("compressors", "heron-meadow")
	w := n.Will(0, noon)
	h.Connect(w.Topic, 1, false, w.Payload)
	m := func(name string, v int32, old bool) []sparkplug.Metric {
		return []sparkplug.Metric{{Name: name, Type: sparkplug.Int32, Value: v, At: noon.Add(-time.Hour), Historical: old}}
	}
	n.Set("", m("known", 3, false), noon)
	tell(h, n.Birth(noon))
	tell(h, n.Set("", m("known", 1, true), noon))
	tell(h, n.Set("", m("new", 2, true), noon))
	if v := h.Values[""]; v["known"].Value != uint32(3) || !v["new"].Null {
		t.Errorf("present values %+v", v)
	}
	if len(h.Stories) != 2 || h.Stories[0].Value != uint32(1) || h.Stories[1].Value != uint32(2) || !h.Stories[1].At.Equal(noon.Add(-time.Hour)) {
		t.Errorf("told %+v", h.Stories)
	}
	if h.Births != 2 || len(h.Breaches) > 0 {
		t.Errorf("%d births; %s", h.Births, strings.Join(h.Breaches, "\n"))
	}
}

// The bytes of a small payload, worked out by hand from the schema in section 6.4.1 of the specification and the
// encoding rules of protocol buffers (protobuf.dev, "Encoding").
func TestBytes(t *testing.T) {
	n := node(t, "t1")
	w := n.Will(7, time.UnixMilli(1000))
	want := "08e807" + // 1: 1000
		"120e" + // 2: metric of 14 bytes
		"0a056264536571" + // 1: "bdSeq"
		"18e807" + // 3: 1000
		"2004" + // 4: Int64
		"5807" // 11: 7
	if got := hex.EncodeToString(w.Payload); got != want || w.Topic != "spBv1.0/compressors/NDEATH/heron-meadow" {
		t.Errorf("%s\n%s\nwant\n%s", w.Topic, got, want)
	}
}

func TestIDs(t *testing.T) {
	for _, id := range []string{"", "a/b", "a+", "#", "a\x00b", "\xff", strings.Repeat("x", 1001)} {
		if _, err := sparkplug.NewNode(id, "n"); err == nil {
			t.Errorf("group %q was taken", id)
		}
		if _, err := sparkplug.NewNode("g", id); err == nil {
			t.Errorf("node %q was taken", id)
		}
		if _, err := sparkplug.NewNode("g", "n", id); err == nil {
			t.Errorf("device %q was taken", id)
		}
	}
	if _, err := sparkplug.NewNode("g", "n", "t1", "t1"); err == nil {
		t.Error("two devices of one name were taken")
	}
	if _, err := sparkplug.NewNode("STATE", "n"); err == nil {
		t.Error("a group STATE was taken")
	}
}

func TestHostState(t *testing.T) {
	for name, c := range map[string]struct {
		said   []string
		online bool
		bad    int
	}{
		"nothing heard":                   {nil, false, 0},
		"online":                          {[]string{`{"online":true,"timestamp":5}`}, true, 0},
		"offline":                         {[]string{`{"online":true,"timestamp":5}`, `{"online":false,"timestamp":6}`}, false, 0},
		"the will of the session before":  {[]string{`{"online":true,"timestamp":5}`, `{"online":false,"timestamp":4}`}, true, 0},
		"the will of this session":        {[]string{`{"online":true,"timestamp":5}`, `{"online":false,"timestamp":5}`}, false, 0},
		"an old online after an offline":  {[]string{`{"online":false,"timestamp":5}`, `{"online":true,"timestamp":4}`}, false, 0},
		"the text of an older version":    {[]string{`ONLINE`}, false, 1},
		"without a time":                  {[]string{`{"online":true}`}, false, 1},
		"without online":                  {[]string{`{"timestamp":1}`}, false, 1},
		"broken after online":             {[]string{`{"online":true,"timestamp":5}`, `{`}, true, 1},
		"more than a host would ever say": {[]string{`{"online":true,"timestamp":5,"x":"` + strings.Repeat("x", 5000) + `"}`}, false, 1},
	} {
		t.Run(name, func(t *testing.T) {
			var h sparkplug.Host
			bad := 0
			for _, s := range c.said {
				if h.Hear([]byte(s)) != nil {
					bad++
				}
			}
			if h.Online() != c.online || bad != c.bad {
				t.Errorf("online %v, %d errors", h.Online(), bad)
			}
		})
	}
}

// command is an NCMD as a host would write it.
func command(name string, field byte, v byte) []byte {
	m := append([]byte{0x0a, byte(len(name))}, name...)
	m = append(m, 0x20, 11, field<<3, v)
	return append([]byte{0x12, byte(len(m))}, m...)
}

func TestCommands(t *testing.T) {
	n := node(t)
	for name, c := range map[string]struct {
		payload []byte
		rebirth bool
		refused string
		bad     bool
	}{
		"rebirth":                  {command("Node Control/Rebirth", 14, 1), true, "", false},
		"no rebirth":               {command("Node Control/Rebirth", 14, 0), false, "", false},
		"rebirth as a number":      {command("Node Control/Rebirth", 10, 1), false, "", false},
		"reboot":                   {command("Node Control/Reboot", 14, 1), false, "Node Control/Reboot", false},
		"rebirth and something":    {append(command("Node Control/Rebirth", 14, 1), command("x", 14, 1)...), true, "x", false},
		"by an alias":              {[]byte{0x12, 4, 0x10, 9, 0x70, 1}, false, "alias 9", false},
		"nothing":                  {nil, false, "", false},
		"no payload":               {[]byte("rebirth, please"), false, "", true},
		"cut off":                  {command("Node Control/Rebirth", 14, 1)[:20], false, "", true},
		"larger than any command":  {bytes.Repeat([]byte{0x08, 1}, 1<<16), false, "", true},
		"a name that is not UTF-8": {command("\xff", 14, 1), false, "", true},
	} {
		t.Run(name, func(t *testing.T) {
			rebirth, refused, err := n.Command(c.payload)
			if rebirth != c.rebirth || strings.Join(refused, ",") != c.refused || (err != nil) != c.bad {
				t.Errorf("rebirth %v, refused %q, %v", rebirth, refused, err)
			}
		})
	}
}

func FuzzDecode(f *testing.F) {
	n, _ := sparkplug.NewNode("g", "n", "t1")
	f.Add(n.Will(1, noon).Payload)
	n.Set("t1", []sparkplug.Metric{{Name: "x", Type: sparkplug.Double, Value: 1.5, At: noon, Props: []sparkplug.Property{{Key: "k", Type: sparkplug.String, Value: "v"}}}}, noon)
	for _, m := range n.Birth(noon) {
		f.Add(m.Payload)
	}
	f.Add([]byte{0x12, 0x02, 0x4a, 0x00})
	f.Fuzz(func(t *testing.T, b []byte) {
		h, err := sparkplug.Decode(b)
		if (h == nil) == (err == nil) {
			t.Fatalf("%v, %v", h, err)
		}
		if h != nil {
			_ = fmt.Sprintf("%+v", *h)
		}
		_, _, _ = n.Command(b)
	})
}

func FuzzHost(f *testing.F) {
	f.Add([]byte(`{"online":true,"timestamp":5}`), []byte(`{"online":false,"timestamp":5}`))
	f.Fuzz(func(t *testing.T, a, b []byte) {
		var h sparkplug.Host
		errA, errB := h.Hear(a), h.Hear(b)
		if errA != nil && errB != nil && h.Online() {
			t.Fatal("online by what cannot be read")
		}
	})
}
