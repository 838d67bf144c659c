package alarm

import (
	"testing"
	"time"

	"pgregory.net/rapid"
)

// Whatever the clock does between two evaluations, a step of it passes no delay: what is raised or returns has held for
// as many evaluations a second apart as its delay has seconds.
func TestClockStepsPassNoDelay(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		on, off := rapid.IntRange(1, 5).Draw(t, "on"), rapid.IntRange(1, 5).Draw(t, "off")
		a := New(Config{Default: Timing{OnDelay: time.Duration(on) * time.Second, OffDelay: time.Duration(off) * time.Second}})
		now, since := t0, 0
		stands, last := false, false
		for i := range rapid.IntRange(1, 80).Draw(t, "n") {
			step := time.Second
			if rapid.IntRange(0, 4).Draw(t, "clock") == 0 {
				step = rapid.SampledFrom([]time.Duration{-24 * time.Hour, -time.Second, -time.Hour, 2 * time.Minute, 24 * time.Hour, 8760 * time.Hour}).Draw(t, "step")
			}
			now = now.Add(step)
			beyond := rapid.IntRange(0, 9).Draw(t, "beyond") > 3 != last
			if beyond != last || i == 0 {
				since = 0
			} else if step == time.Second {
				since++
			}
			last = beyond
			cond := Condition{Key: "k", Known: true}
			if beyond {
				cond.Severity = Alert
			}
			a.Step(now, []Condition{cond})
			if is := a.Level("k") > NoSeverity; is != stands {
				if need := map[bool]int{true: on, false: off}[is]; since < need {
					t.Fatalf("stands %v after %d s, its delay is %d s", is, since, need)
				}
				stands = is
			}
		}
	})
}

// A shelf hides for as long as was said, whatever the clock does: set back, never longer than the longest shelf; set on,
// it ends.
func TestClockStepsAndShelves(t *testing.T) {
	for name, c := range map[string]struct {
		step, more time.Duration
		want       State
	}{
		"as it was":      {0, 7 * time.Hour, Shelved},
		"its time":       {0, 8 * time.Hour, Unacked},
		"set on":         {48 * time.Hour, 0, Unacked},
		"set back a day": {-24 * time.Hour, 23 * time.Hour, Shelved},
		"a year back":    {-8760 * time.Hour, 24 * time.Hour, Unacked},
	} {
		a := New(Config{})
		a.Step(t0, []Condition{{Key: "k", Known: true, Severity: Alert}})
		if _, err := a.Shelve("k", "op", "r", t0.Add(8*time.Hour), t0); err != nil {
			t.Fatal(err)
		}
		now := t0.Add(c.step)
		a.Step(now, nil)
		a.Step(now.Add(c.more), nil)
		if got := a.Points()[0].State; got != c.want {
			t.Errorf("%s: %s, want %s", name, got, c.want)
		}
	}
}
