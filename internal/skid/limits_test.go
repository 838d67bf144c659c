package skid

import (
	"slices"
	"strings"
	"testing"
)

// How an alarm of a limit comes, stays and is suppressed is the file's to say.
func TestMannerOfALimit(t *testing.T) {
	base, _, _ := strings.Cut(example(t), "\nlimits:")
	limits := func(s string) (*Skid, error) { return Parse("m", []byte(base+"\nlimits:\n  - "+s+"\n")) }
	sk, err := limits("{of: t1, measure: reversal_deg, low: 15, severity: alert, on_turns: 20, off_turns: 5, latch: yes, unless: [starting, unloaded]}")
	if err != nil {
		t.Fatal(err)
	}
	l := sk.Limits[0]
	if l.OnTurns != 20 || l.OffTurns != 5 || !l.Latch || !slices.Equal(l.Unless, []string{"starting", "unloaded"}) {
		t.Errorf("%+v", l)
	}
	var out strings.Builder
	if err := Report(&out, sk, 0); err != nil {
		t.Fatal(err)
	}
	said := strings.Join(strings.Fields(out.String()), " ")
	for _, want := range []string{"at least 20 turns to come, 5 to go", "stays until it is acknowledged and reset", "suppressed while starting, unloaded"} {
		if !strings.Contains(said, want) {
			t.Errorf("check does not say %q", want)
		}
	}
	if sk, err := limits("{of: t1, measure: reversal_deg, low: 15, severity: alert}"); err != nil || sk.Limits[0].Latch || sk.Limits[0].OnTurns != 0 || sk.Limits[0].Unless != nil {
		t.Errorf("a plain limit: %+v, %v", sk.Limits[0], err)
	}
	for _, bad := range []string{"on_turns: 0", "off_turns: 1.5", "latch: maybe", "unless: starting", "unless: [steady]", "unless: [starting, starting]", "unless: []", "unless: [7]"} {
		if _, err := limits("{of: t1, measure: reversal_deg, low: 15, severity: alert, " + bad + "}"); err == nil {
			t.Errorf("accepted %s", bad)
		}
	}
}
