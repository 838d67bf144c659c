package station

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"lapwing/internal/skid"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// A command that is refused before it is looked at changes nothing and is in the journal like every other order.
func TestRefusedCommandIsJournalled(t *testing.T) {
	const leak = "t1.he.suction/leaking"
	s := staffed(t)
	before, points := s.line.Alarms().Last(), s.stateOf(leak)
	for _, o := range []Order{
		{Verb: "acknowledge", Key: leak, By: "A", Via: "mqtt"},
		{Verb: "unreadable", By: "\x07\xff" + strings.Repeat("x", 300), Via: "mqtt"},
	} {
		r := s.decide(o, errors.New("not allowed here"))
		acts, err := s.ledger.Acts(r.ID, 1)
		if err != nil || len(acts) != 1 {
			t.Fatalf("acts %v, %v", acts, err)
		}
		if a := acts[0]; r.Accepted || a.Accepted || r.Said != "not allowed here" || a.Said != r.Said || a.Via != "mqtt" || a.Verb != o.Verb || len([]rune(a.By)) > 65 || !r.OnDisk {
			t.Errorf("receipt %+v, journal %+v", r, a)
		}
	}
	if s.line.Alarms().Last() != before || s.stateOf(leak) != points {
		t.Error("a refused command changed an alarm")
	}
	if r := s.decide(Order{Verb: "rebirth", By: "A", Via: "mqtt"}, nil); r.Accepted || !strings.Contains(r.Said, "no broker") {
		t.Errorf("rebirth without a broker: %+v", r)
	}
}

// What a skid file can allow is what the wire knows, and it is for the file's own broker.
func TestCommandsOfTheSkidFile(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "..", "configs", "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	text := strings.Replace(string(raw), "  root: lapwing\n", "  root: lapwing\n  commands: ["+strings.Join(wire.CommandVerbs(), ", ")+"]\n", 1)
	sk, err := skid.Parse("test.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(sk.Uplink.Commands, wire.CommandVerbs()) {
		t.Errorf("allowed %v", sk.Uplink.Commands)
	}
	s := staffed(t)
	if s.commands() != nil {
		t.Error("commands are on without a word in the skid file")
	}
	s.sk.Uplink.Commands, s.o.Broker = []string{"reset"}, ""
	if c := s.commands(); c == nil || !slices.Equal(c.Allowed, []string{"reset"}) {
		t.Errorf("%+v", c)
	}
	if s.o.Broker = "tcp://127.0.0.1:1"; s.commands() != nil {
		t.Error("commands are on at a broker that the skid file does not name")
	}
}

func TestUplinkTroubles(t *testing.T) {
	s := staffed(t)
	now := time.Date(2030, 1, 1, 0, 0, 0, 0, time.UTC)
	for _, c := range []struct {
		st   uplink.Status
		want string
	}{
		{uplink.Status{}, ""},
		{uplink.Status{Connected: true, CertUntil: now.Add(31 * 24 * time.Hour)}, ""},
		{uplink.Status{LastError: "no route"}, "does not hear this monitor: no route; 4 messages wait"},
		{uplink.Status{Connected: true, CertUntil: now.Add(29 * 24 * time.Hour)}, "ends on 2030-01-30"},
		{uplink.Status{Connected: true, Unheard: "thrown away"}, "not sure that the control room hears this monitor: thrown away"},
		{uplink.Status{Connected: true, Commands: &uplink.CommandStatus{LastError: "refused"}}, "not heard: refused"},
	} {
		got := s.uplinkTroubles(&c.st, now)
		if c.want == "" && len(got) != 0 || c.want != "" && (len(got) != 1 || !strings.Contains(got[0], c.want)) {
			t.Errorf("%+v: %q, want %q", c.st, got, c.want)
		}
	}
}
