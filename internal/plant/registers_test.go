package plant

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// No register belongs to two entries, each lies within the image, and the table of one file is the same twice.
func TestTheMapIsInOrder(t *testing.T) {
	files, err := filepath.Glob(filepath.Join("..", "..", "configs", "*.yaml"))
	if err != nil || len(files) == 0 {
		t.Fatal("no examples", err)
	}
	for _, f := range files {
		sk, err := skid.Load(f)
		if err != nil {
			t.Fatal(err)
		}
		sk.Modbus.Server.Acknowledge = true
		m := NewMap(sk)
		taken, names := map[string]string{}, map[string]bool{}
		for i := range m.Entries {
			e := &m.Entries[i]
			what := e.Subject + " " + e.Name
			if names[fmt.Sprint(e.Coil, what)] {
				t.Errorf("%s: %s twice", f, what)
			}
			names[fmt.Sprint(e.Coil, what)] = true
			for k := range e.Words {
				at := fmt.Sprint(e.Coil, e.Address+k)
				if by := taken[at]; by != "" {
					t.Errorf("%s: register %s is of %s and of %s", f, at, by, what)
				}
				taken[at] = what
				if e.Address+k >= m.size {
					t.Errorf("%s: %s lies beyond the image", f, what)
				}
			}
			if want := map[string]int{"u16": 1, "bool": 1, "u32": 2, "f32": 2}[e.Type]; want != e.Words {
				t.Errorf("%s: %s has %d registers", f, what, e.Words)
			}
		}
		again := NewMap(sk)
		if again.print != m.print || m.print == 0 {
			t.Errorf("%s: fingerprints %x and %x", f, m.print, again.print)
		}
	}
}

// twelveThrows is as large a machine as a skid file may describe.
func TestTheLargestMachineFitsIntoTheMap(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	th := sk.Throws[0]
	sk.Throws = nil
	for i := range 12 {
		th.ID = "t" + strconv.Itoa(i+1)
		sk.Throws = append(sk.Throws, th)
	}
	m := NewMap(sk)
	if at := groupsAt + groupSize*len(m.groups); at > endsAt {
		t.Errorf("groups reach %d", at)
	}
	if at := endsAt + endSize*len(m.ends); at > throwsAt {
		t.Errorf("ends reach %d", at)
	}
	if at := throwsAt + throwSize*len(m.throws); at > channelsAt {
		t.Errorf("throws reach %d", at)
	}
}

func TestTheTableSaysWhatTheImageHolds(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	m := NewMap(sk)
	n, points := snapshot()
	im := m.draw(n, points, true, 7, false)
	var b bytes.Buffer
	if err := m.CSV(&b); err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(&b).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	got := map[string]float64{}
	for _, r := range rows[1:] {
		at, _ := strconv.Atoi(r[0])
		if r[2] != strconv.Itoa(40001+at) || r[1] != strconv.Itoa(30001+at) {
			t.Errorf("references of %v", r)
		}
		w := im.words[at:]
		v := float64(w[0])
		switch r[4] {
		case "f32":
			v = float64(math.Float32frombits(uint32(w[0])<<16 | uint32(w[1])))
		case "u32":
			v = float64(uint32(w[0])<<16 | uint32(w[1]))
		}
		got[strings.TrimSpace(r[5]+" "+r[6])] = v
	}
	for name, want := range map[string]float64{
		"heartbeat": 7, "map_version": 1, "map_fingerprint": float64(m.print), "health": 2, "shaft": 3, "mode": 2, "worst_severity": 2,
		"unacknowledged": 1, "standing": 2, "standing_advisory": 1, "standing_alert": 1, "standing_danger": 0, "alarm_flood": 1,
		"channels_not_good": 1, "troubles": 1, "turns": 70001, "turns_not_valid": 3, "speed_rpm": 740.5, "speed_known": 1, "time_s": 1767225600,
		"t1.he.suction state": 2, "t1.he.suction severity": 2, "t1.he.suction kind": 1, "t1.he.suction open_points": 1, "t1.he.suction valve": 2,
		"t1.he.suction known": 1 | 2 | 4 | 16, "t1.he.suction found_leak_area_mm2": 11.25, "t1.he.suction found_lost_power_kw": 0.5, "t1.he.suction found_leak_percent": math.NaN(), "t1.he.suction leak_area_mm2": 12.5, "t1.he.suction leak_percent": 1.75,
		"t1.he.discharge state": 1, "t1.he.discharge known": 0, "t1.he.discharge leak_area_mm2": math.NaN(),
		"t1.ce.suction state": 5, "t1.ce.suction severity": 0,
		"t1.he state": 1, "t1.he p_suction_bar_abs": 8.125, "t1.he ratio_plateau": math.NaN(), "t1.he known": 1, "t1.he alarm_state": 1,
		"t1 duty": 4, "t1 load_step": 2, "t1 rod_load_max_kn": 55.5, "t1 known": 1 | 1<<10, "t1.rings leak_area_mm2": -0.5,
		"t1 alarm_state": 3, "t1 alarm_severity": 1, "t2 duty": 0, "t2 load_step": 65535, "t2.he state": 65535,
		"p1h state": 1, "a1 state": 4, "a2 state": 65535,
	} {
		v, ok := got[name]
		if !ok || v != want && !(math.IsNaN(v) && math.IsNaN(want)) {
			t.Errorf("%s is %v (%v), want %v", name, v, ok, want)
		}
	}
	// What is not known is one certain quiet NaN.
	for i := range m.Entries {
		if e := &m.Entries[i]; e.Type == "f32" && math.IsNaN(got[strings.TrimSpace(e.Subject+" "+e.Name)]) && (im.words[e.Address] != 0x7FC0 || im.words[e.Address+1] != 0) {
			t.Errorf("%s %s is %x %x", e.Subject, e.Name, im.words[e.Address], im.words[e.Address+1])
		}
	}
	sk.Modbus.Server.Order = "cdab"
	if low := NewMap(sk).draw(n, points, true, 7, false).words; low[rRPM] != im.words[rRPM+1] || low[rRPM+1] != im.words[rRPM] || low[rTurns] != im.words[rTurns+1] {
		t.Error("order cdab does not put the low word first")
	}
}

// What was measured goes with the turns; what was found stands on.
func TestAMachineThatStandsHasNoMeasures(t *testing.T) {
	m := NewMap(machine(t, "biomethane-two-throw.yaml"))
	n, points := snapshot()
	n.Health.State, n.Health.RPM = "standstill", nil
	w := m.draw(n, points, false, 1, false).words
	if w[groupsAt+gValid] != 4|16 || w[groupsAt+gNumbers] != 0x7FC0 || w[rRPMValid] != 0 || w[groupsAt] != 2 {
		t.Errorf("% x", w[groupsAt:groupsAt+groupSize])
	}
}

// snapshot is what a station would show, with a bit of everything.
func snapshot() (*wire.Now, []wire.Point) {
	rpm := 740.5
	n := &wire.Now{At: time.Date(2026, 1, 1, 0, 0, 0, 0, time.UTC), Health: wire.Health{State: "running", Learned: true, Turns: 70001, BadTurns: 3, RPM: &rpm, Trouble: []string{"x"},
		Channels: []wire.Channel{{ID: "p1h", State: "good"}, {ID: "a1", State: "failure"}}},
		Standing: []wire.Alarm{{Key: "t1.he.suction/leaking", Severity: "alert"}, {Key: "t1/reversal", Severity: "advisory"}},
		Findings: []wire.Finding{{Subject: "t1.he.suction", Kind: "leaking", Valve: "t1.he.s2", Amounts: []wire.Amount{{Name: "leak_area_mm2", Value: 11.25}, {Name: "lost_power_kw", Value: 0.5}}}},
		Latest: &wire.Turn{Type: "turn", Valid: true, Throws: []wire.TurnThrow{{ID: "t1", Duty: "steady", Step: 2, Values: map[string]float64{"rod_load_max_kn": 55.5},
			Ends:  []wire.TurnEnd{{End: "he", State: "following", Values: map[string]float64{"p_suction_bar_abs": 8.125}}},
			Paths: map[string]map[string]float64{"t1.he.suction": {"leak_area_mm2": 12.5, "leak_percent": 1.75}, "t1.rings": {"leak_area_mm2": -0.5}}}}},
	}
	return n, []wire.Point{
		{Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", State: "unacknowledged", Severity: "alert"},
		{Key: "t1.he.suction/fluttering", Subject: "t1.he.suction", Kind: "fluttering", State: "normal", Severity: "none"},
		{Key: "t1.ce.suction/leaking", Subject: "t1.ce.suction", Kind: "leaking", State: "shelved", Severity: "none"},
		{Key: "t1/reversal", Subject: "t1", Kind: "reversal_deg-low", State: "acknowledged", Severity: "advisory"},
	}
}
