package station

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/uplink"
	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/uplink/sparkplug/sparkplugtest"
)

// speaking is an open station of an example machine whose file asks for Sparkplug.
func speaking(t *testing.T, example string) *Station {
	t.Helper()
	raw, err := configs.Files.ReadFile(example)
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "skid.yaml")
	text := strings.Replace(string(raw), "\nuplink:", "\nuplink:\n  dialect: sparkplug", 1)
	if text == string(raw) {
		text += "\nuplink:\n  dialect: sparkplug\n"
	}
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	s, err := Open(Options{SkidFile: file, State: t.TempDir(), Source: "model:swings", Broker: "tcp://127.0.0.1:1", Listen: "none"})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

// A birth of each example machine breaks no rule: names are unique, also but for case, and a folder is no metric.
func TestBirthsOfTheExamples(t *testing.T) {
	files, err := configs.Files.ReadDir(".")
	if err != nil {
		t.Fatal(err)
	}
	machines := 0
	for _, f := range files {
		if !strings.HasSuffix(f.Name(), ".yaml") {
			continue
		}
		machines++
		t.Run(f.Name(), func(t *testing.T) {
			s := speaking(t, f.Name())
			p := s.sparkplug()
			var devices []string
			for _, d := range p.Devices {
				devices = append(devices, d.ID)
				if len(d.Measures) < 40 {
					t.Errorf("%s has %d measures", d.ID, len(d.Measures))
				}
			}
			n, err := sparkplug.NewNode(p.Group, p.Node, devices...)
			if err != nil {
				t.Fatal(err)
			}
			told := uplink.Vocabulary(p)
			for device, ms := range told {
				n.Define(device, ms...)
			}
			h := sparkplugtest.New(p.Group, p.Node)
			now := time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC)
			w := n.Will(0, now)
			h.Connect(w.Topic, 1, false, w.Payload)
			for _, m := range n.Birth(now) {
				h.Hear(m.Topic, 0, false, m.Payload)
			}
			if len(h.Breaches) > 0 {
				t.Error(strings.Join(h.Breaches, "\n"))
			}
			for device, vals := range h.Values {
				for name := range vals {
					for other := range vals {
						if strings.HasPrefix(other, name+"/") {
							t.Errorf("%q: %s is a metric and the folder of %s", device, name, other)
						}
					}
				}
				if len(told[device])+map[bool]int{true: 2}[device == ""] != len(vals) {
					t.Errorf("%q: %d metrics told, %d born: names collide", device, len(told[device]), len(vals))
				}
			}
			if s.pub == nil {
				t.Error("there is no publisher")
			}
		})
	}
	if machines == 0 {
		t.Error("no example")
	}
}

func TestConnectionsAreCounted(t *testing.T) {
	s := speaking(t, "biomethane-two-throw.yaml")
	next := func() uint8 {
		t.Helper()
		n, err := s.nextBdSeq()
		if err != nil {
			t.Fatal(err)
		}
		return n
	}
	if a, b := next(), next(); a != 0 || b != 1 { // tck-id-topics-nbirth-bdseq-increment
		t.Errorf("the first are %d and %d", a, b)
	}
	if err := s.ledger.PutDoc(docBdSeq, uint8(255)); err != nil {
		t.Fatal(err)
	}
	if n := next(); n != 0 {
		t.Errorf("%d after 255", n)
	}
}

func TestJSONUnlessTheFileSaysOtherwise(t *testing.T) {
	s := staffed(t)
	if s.sparkplug() != nil {
		t.Error("Sparkplug unasked")
	}
}
