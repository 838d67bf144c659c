package verdict

import (
	"slices"
	"strings"
	"testing"

	"lapwing/internal/duty"
)

// Extra hits are flutter, whether the impact is late or not; with a hard impact they are part of that. What the others hear
// of them is not theirs.
func TestExtraHitsAreFlutterUnlessHard(t *testing.T) {
	for name, c := range map[string]struct {
		do   func(s *synth)
		kind string // the only kind that may be said of the group; empty: none
	}{
		"hits alone":    {func(s *synth) { s.rattle["t1.he.discharge"], s.rattle["t1.ce.suction"] = 20, 12 }, Fluttering},
		"few":           {func(s *synth) { s.rattle["t1.he.discharge"] = 4 }, ""},
		"hits and hard": {func(s *synth) { s.rattle["t1.he.discharge"], s.hit["t1.he.discharge"] = 20, 0.8 }, ImpactingHard},
		"both":          {func(s *synth) { s.rattle["t1.he.discharge"], s.stick["t1.he.discharge"] = 20, 0.5 }, Fluttering},
	} {
		t.Run(name, func(t *testing.T) {
			s, r := commissioned(t, 8)
			c.do(s)
			said := map[string]bool{}
			r.run(s, 300, nil, func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					said[f.Subject+"/"+f.Kind] = true
				}
			})
			want := map[string]bool{}
			if c.kind != "" {
				want["t1.he.discharge/"+c.kind] = true
			}
			if len(said) != len(want) || c.kind != "" && !said["t1.he.discharge/"+c.kind] {
				t.Errorf("said %v, want %v", said, want)
			}
		})
	}
}

// Where the pin load changes its sign the crosshead may be what hits: the finding says so; elsewhere it does not.
func TestHardImpactAtReversalMayBeKnock(t *testing.T) {
	for shift, near := range map[float64]bool{-1: true, 30: false} {
		s := newSynth(8)
		s.pins = shift
		r := commission(t, s, 500, nil)
		s.hit["t1.he.discharge"] = 0.8
		found := false
		r.run(s, 200, nil, func(_ duty.Block, fs []Finding) {
			for _, f := range fs {
				if f.Kind != ImpactingHard || f.Grade == None {
					continue
				}
				found = true
				if slices.Contains(f.Ambiguous, "t1.crosshead") != near || strings.Contains(f.Sentence, "crosshead") != near {
					t.Errorf("pin load changes sign %g° after the opening: %s", shift, f.Sentence)
				}
			}
		})
		if !found {
			t.Errorf("shift %g: no hard impact found", shift)
		}
	}
}
