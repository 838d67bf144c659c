package skid

import (
	"math"
	"os"
	"strings"
	"testing"
	"time"
)

const goodModbus = `
modbus:
  devices:
    - name: plc
      url: tcp://192.0.2.10:502
      unit: 1
      every_s: 1
      canary: {function: 3, address: 0, is: 4711}
      tags:
        - {value: load_step, function: 1, address: 5}
        - {value: stage1.p_suction, function: 4, address: 100, type: f32, order: cdab, unit: bar_gauge, min: 2, max: 16, max_age_s: 4}
        - {value: TT-1111, function: 3, address: 200, type: i16, scale: 0.1, unit: c, max_age_s: 60}
    - {name: covers, url: "rtu:///dev/ttyS1?baud=9600", parity: even, unit: 3, tags: [{value: t1.he.d1.cover, function: 4, address: 0, unit: k}]}
  server:
    listen: 192.0.2.20:502
    allow: [192.0.2.7, 198.51.100.0/24]
    acknowledge: yes
`

func TestModbusIsReadInSI(t *testing.T) {
	sk := parsed(t, example(t)+goodModbus)
	m := sk.Modbus
	if len(m.Devices) != 2 || len(m.Devices[0].Tags) != 3 {
		t.Fatalf("%+v", m)
	}
	p, c, r := m.Devices[0].Tags[1], m.Devices[0].Tags[2], m.Devices[1]
	if p.What != PlantSuctionPressure || p.Words() != 2 || p.Factor != 1e5 || math.Abs(p.Shift-101300) > 1e-6 || math.Abs(p.Min-301300) > 1e-6 || math.Abs(p.Max-1701300) > 1e-6 || p.MaxAge != 4*time.Second {
		t.Errorf("pressure %+v", p)
	}
	if c.Valve != "t1.he.s1" || c.Value != "t1.he.s1.cover" || c.Shift != 273.15 || c.Scale != 0.1 || c.MaxAge != time.Minute {
		t.Errorf("cover %+v", c)
	}
	if r.URL != "rtu:///dev/ttyS1" || r.Baud != 9600 || r.Parity != "even" || r.StopBits != 1 || r.Timeout != 300*time.Millisecond || r.WorstAnswer != 600*time.Millisecond {
		t.Errorf("serial %+v", r)
	}
	if s := m.Server; s.Listen != "192.0.2.20:502" || s.Unit != 1 || s.Order != "abcd" || s.PerAddress != 4 || !s.Acknowledge || strings.Join(s.Allow, " ") != "192.0.2.7/32 198.51.100.0/24" {
		t.Errorf("server %+v", s)
	}
	if k := m.Devices[0].Canary; k == nil || k.Is != 4711 || k.Type != "u16" {
		t.Errorf("canary %+v", k)
	}
	if parsed(t, example(t)).Modbus.Devices != nil {
		t.Error("devices without a section")
	}
}

// Each mistake is named where it stands, with what to write instead.
func TestModbusMistakes(t *testing.T) {
	base := example(t)
	for name, c := range map[string]struct{ old, with, anchor, path, says, fix string }{
		"a scheme of something else":     {"tcp://192.0.2.10:502", "http://192.0.2.10:502", "http", "devices[0].url", `scheme "http"`, "tcp://host:502"},
		"no port":                        {"tcp://192.0.2.10:502", "tcp://192.0.2.10", "tcp", "devices[0].url", "no host and port", "tcp://host:502"},
		"two strokes":                    {"rtu:///dev/ttyS1?baud=9600", "rtu://dev/ttyS1", "\"rtu", "devices[1].url", "no serial line", "three strokes"},
		"an odd speed":                   {"baud=9600", "baud=fast", "", "devices[1].url", `"fast" is no speed`, "?baud=9600"},
		"parity in the address":          {"baud=9600", "parity=even", "", "devices[1].url", `"parity"`, "keys beside url"},
		"nobody's unit":                  {"unit: 3", "unit: 0", "0", "devices[1].unit", "nobody's", "1 to 247"},
		"a worst answer over TCP":        {"every_s: 1\n", "every_s: 1\n      worst_answer_ms: 100\n", "100", "devices[0].worst_answer_ms", "serial line", "delete it"},
		"TLS without certificates":       {"tcp://192.0.2.10:502", "tcp+tls://192.0.2.10:802", "", "devices[0].ca_file", "missing", "certificates on both sides"},
		"certificates without TLS":       {"every_s: 1\n", "every_s: 1\n      ca_file: ca.pem\n", "ca.pem", "devices[0].ca_file", "not one of TLS", "tcp+tls://"},
		"a value nobody knows":           {"stage1.p_suction", "stage1.p_suctoin", "stage1.p_suctoin", "devices[0].tags[1].value", "no process value", "did you mean stage1.p_suction?"},
		"a stage that is not there":      {"stage1.p_suction", "stage2.p_suction", "stage2", "devices[0].tags[1].value", "no stage 2", "count from 1"},
		"a cover that is not there":      {"TT-1111", "TT-1119", "TT-1119", "devices[0].tags[2].value", "no process value", "TT-111"},
		"one value twice":                {"t1.he.d1.cover", "TT-1111", "", "devices[1].tags[0].value", "given by modbus.devices[0].tags[2]", "keep one"},
		"bar, but which":                 {"bar_gauge", "bar", "bar", "devices[0].tags[1].unit", "no unit of stage1.p_suction", "bar_abs or bar_gauge"},
		"no unit":                        {"unit: bar_gauge, ", "", "", "devices[0].tags[1].unit", "missing", "bar_abs"},
		"a temperature in bar":           {"unit: k", "unit: bar_abs", "bar_abs", "devices[1].tags[0].unit", "no unit of t1.he.d1.cover", "c, k, f"},
		"a pressure out of a bit":        {"function: 4, address: 100, type: f32, order: cdab", "function: 2, address: 100", "", "devices[0].tags[1].value", "a single bit", "register"},
		"a float out of a coil":          {"function: 1, address: 5", "function: 1, address: 5, type: f32", "f32", "devices[0].tags[0].type", "single bits", "type: bool"},
		"a bit out of a register":        {"function: 3, address: 200, type: i16", "function: 3, address: 200, type: bool", "bool", "devices[0].tags[2].type", "read registers", "function: 1 or 2"},
		"a function that writes":         {"function: 3, address: 200", "function: 6, address: 200", "6", "devices[0].tags[2].function", "outside 1 to 4", "check"},
		"an address beyond the last":     {"address: 100, type: f32", "address: 65535, type: f32", "65535", "devices[0].tags[1].address", "beyond 65535", "count from 0"},
		"too old before the next":        {"max_age_s: 4", "max_age_s: 1.5", "1.5", "devices[0].tags[1].max_age_s", "before the next", "more than 2 s"},
		"older than the line goes by":    {"max_age_s: 4", "max_age_s: 25", "25", "devices[0].tags[1].max_age_s", "outside 0.2 to 20", ""},
		"nothing believed":               {"max: 16", "max: 1", "1", "devices[0].tags[1].max", "no value is believed", "exceed"},
		"a scale of nothing":             {"scale: 0.1", "scale: 0", "0", "devices[0].tags[2].scale", "every value alike", "one count"},
		"a misspelt order":               {"order: cdab", "order: acbd", "acbd", "devices[0].tags[1].order", "cannot be used", "badc"},
		"two devices of one name":        {"name: covers", "name: plc", "plc", "devices[1].name", "another device", "own name"},
		"a server nowhere":               {"listen: 192.0.2.20:502", "listen: 502", "502", "server.listen", "text belongs", "quotes"},
		"an address list of words":       {"[192.0.2.7, 198", "[office, 198", "office", "server.allow[0]", "neither", "198.51.100.0/24"},
		"anybody may acknowledge":        {"    allow: [192.0.2.7, 198.51.100.0/24]\n", "", "", "server.acknowledge", "anybody who reaches", "allow"},
		"half a certificate":             {"acknowledge: yes", "acknowledge: yes\n    cert_file: c.pem", "", "server", "half of a TLS", "key_file"},
		"a heartbeat seen too rarely":    {"canary: {function: 3, address: 0, is: 4711}", "heartbeat: {function: 3, address: 0, within_s: 1}", "1}", "devices[0].heartbeat.within_s", "not read often enough", "more than 2 s"},
		"a canary that says nothing":     {"is: 4711", "order: abcd", "", "devices[0].canary.is", "missing", "is"},
		"a device without tags":          {", tags: [{value: t1.he.d1.cover, function: 4, address: 0, unit: k}]", "", "", "devices[1].tags", "missing", "list the tags"},
		"a misspelt key":                 {"every_s: 1\n", "evry_s: 1\n", "evry_s", "devices[0].evry_s", "unknown key", "every_s"},
		"line settings over the network": {"every_s: 1\n", "every_s: 1\n      baud: 9600\n", "9600", "devices[0].baud", "serial line", "delete it"},
	} {
		t.Run(name, func(t *testing.T) {
			section, i := swap(t, goodModbus, c.old, c.with)
			sk, err := Parse("m.yaml", []byte(base+section))
			if err == nil || sk != nil {
				t.Fatal("accepted")
			}
			var found *Problem
			for _, p := range Problems(err) {
				if p.Path == "modbus."+c.path && strings.Contains(p.Msg, c.says) {
					found = &p
				}
			}
			if found == nil {
				t.Fatalf("no problem of %q saying %q in:\n%v", c.path, c.says, err)
			}
			if !strings.Contains(found.Fix, c.fix) {
				t.Errorf("the remedy %q does not hold %q", found.Fix, c.fix)
			}
			if c.anchor == "" {
				return
			}
			file := base + section
			at := len(base) + i + strings.Index(c.with, c.anchor)
			want := Place{1 + strings.Count(file[:at], "\n"), at - strings.LastIndexByte(file[:at], '\n')}
			if found.Place != want {
				t.Errorf("points at %d:%d, the mistake is at %d:%d:\n%v", found.Line, found.Col, want.Line, want.Col, *found)
			}
		})
	}
}

func TestTheCheckSaysWhatIsReadOverModbus(t *testing.T) {
	sk := parsed(t, example(t)+goodModbus)
	var out strings.Builder
	if err := Report(&out, sk, 0); err != nil {
		t.Fatal(err)
	}
	said := strings.Join(strings.Fields(out.String()), " ")
	for _, want := range []string{
		"plc tcp://192.0.2.10:502, unit 1, every 1s, an answer within 1s", "canary: holding register 0, u16 is 4711",
		"stage1.p_suction: input register 100, f32 cdab in bar_gauge, believed from 2 to 16, for 4s",
		"t1.he.s1.cover: holding register 200, i16 times 0.1 plus 0 in c", "load_step: coil 5, for 5s",
		"rtu:///dev/ttyS1, unit 3, every 1s, an answer within 300ms; 9600 baud, 8 data bits, parity even, 1 stop bits; rests 600ms after an error",
		"192.0.2.20:502, unit 1, for 192.0.2.7/32, 198.51.100.0/24; at most 32 connections, 4 from one address", "read only but for the acknowledge coils",
	} {
		if !strings.Contains(said, want) {
			t.Errorf("the check does not say %q", want)
		}
	}
	out.Reset()
	if err := Report(&out, parsed(t, example(t)), 0); err != nil || strings.Contains(out.String(), "\nModbus\n") {
		t.Errorf("a file without the section: %v", err)
	}
}

func TestDoubtsAboutModbus(t *testing.T) {
	doubts := func(old, with string) (all string) {
		section, _ := swap(t, goodModbus, old, with)
		for _, d := range Doubts(parsed(t, example(t)+section)) {
			if strings.HasPrefix(d.Path, "modbus") {
				all += d.Error() + "\n"
			}
		}
		return all
	}
	for name, c := range map[string][3]string{
		"no load step": {"        - {value: load_step, function: 1, address: 5}\n", "", "the load step is not, though the machine has 4"},
		"one pressure": {"every_s: 1", "every_s: 1 ", "one of the line pressures"},
		"anybody":      {"    allow: [192.0.2.7, 198.51.100.0/24]\n    acknowledge: yes\n", "", "listens on 192.0.2.20:502 for anybody"},
	} {
		if got := doubts(c[0], c[1]); !strings.Contains(got, c[2]) {
			t.Errorf("%s: %q", name, got)
		}
	}
	if got := doubts("        - {value: TT-1111", "        - {value: stage1.p_discharge, function: 4, address: 102, type: f32, unit: bar_gauge}\n        - {value: TT-1111"); got != "" {
		t.Errorf("doubts about a sound section: %q", got)
	}
}

// The sections that the examples show behind comment signs are as good as they look.
func TestTheModbusExamplesAreGood(t *testing.T) {
	found := 0
	for _, f := range configs(t) {
		raw, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		before, section, ok := strings.Cut(string(raw), "\n# modbus:")
		if !ok {
			continue
		}
		found++
		lines := strings.Split("# modbus:"+section, "\n")
		for i := range lines {
			lines[i] = strings.TrimPrefix(lines[i], "# ")
		}
		sk, err := Parse(f, []byte(before+"\n"+strings.Join(lines, "\n")))
		if err != nil {
			t.Error(err)
			continue
		}
		if len(sk.Modbus.Devices) != 1 || len(sk.Modbus.Devices[0].Tags) < 6 {
			t.Errorf("%s: %+v", f, sk.Modbus)
		}
		for _, d := range Doubts(sk) {
			if strings.HasPrefix(d.Path, "modbus") {
				t.Errorf("%s: %v", f, d)
			}
		}
	}
	if found < 2 {
		t.Errorf("%d examples show the section", found)
	}
}

func FuzzParseModbus(f *testing.F) {
	f.Add(goodModbus)
	f.Add("\nmodbus: {devices: [{name: a, url: 'rtu:///dev/ttyS0?baud=1', tags: [{value: load_step}]}], server: {listen: ':502'}}\n")
	f.Add("\nmodbus: []\n")
	base := example(f)
	f.Fuzz(func(t *testing.T, section string) {
		sk, err := Parse("m.yaml", []byte(base+section))
		if (sk == nil) == (err == nil) {
			t.Fatal("neither or both")
		}
		for _, p := range Problems(err) {
			if p.Line < 1 || p.Col < 1 {
				t.Fatalf("without a place: %v", p)
			}
		}
		if sk == nil {
			return
		}
		for i := range sk.Modbus.Devices {
			d := &sk.Modbus.Devices[i]
			if d.Every <= 0 || d.Timeout <= 0 || len(d.Tags) == 0 {
				t.Fatalf("%+v", d)
			}
			for _, x := range d.Tags {
				if x.Factor == 0 || x.Address < 0 || x.Address+x.Words() > 65536 || !(x.Min < x.Max) || x.MaxAge <= d.Every || x.Stage >= sk.Stages() {
					t.Fatalf("%+v", x)
				}
			}
		}
		_ = Doubts(sk)
	})
}
