package station

import (
	"encoding/json"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// The computed ripple is in the health of the phase reference and is there again after a restart, from the first turn on.
func TestComputedRippleOverARestart(t *testing.T) {
	file := edited(t, "  # inertia_kgm2: 38", "  inertia_kgm2: 38 #")
	a, b := strings.Index(file, "  uncertainty_deg:"), strings.Index(file, "gas:\n")
	sk, err := skid.Parse("uneven.yaml", []byte(file[:a]+file[b:]))
	if err != nil {
		t.Fatal(err)
	}
	var mem *Memory
	play := func() (first float64, said string) {
		l := through(t, sk, model.Script{RPM: 900}, 4, 1.2, func(info acq.Info) *Line {
			l, err := NewLine(sk, info, nil, LearnPlan{}, nil, alarm.New(AlarmTiming(sk)))
			if err != nil {
				t.Fatal(err)
			}
			if mem != nil {
				if err := l.Remember(*mem); err != nil {
					t.Fatal(err)
				}
			}
			return l
		}, func(_ *Line, o *Output) {
			if o.Record.Valid && first == 0 {
				first = *o.Record.Throws[0].AngleU
			}
		})
		raw, err := json.Marshal(l.Memory())
		if err != nil {
			t.Fatal(err)
		}
		mem = new(Memory)
		if err := json.Unmarshal(raw, mem); err != nil {
			t.Fatal(err)
		}
		return first, channelNamed(t, l.Channels(), sk.Phase.Channel).Reason
	}
	cold, said := play()
	if cold < 1 || !strings.Contains(said, "computed from the torque of all throws") {
		t.Errorf("first turn ±%g°; %q", cold, said)
	}
	if warm, _ := play(); warm != 0.3 {
		t.Errorf("first turn after a restart ±%g°, want 0.3", warm)
	}
}
