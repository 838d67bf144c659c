package wire_test

import (
	"testing"
	"time"

	"lapwing/internal/wire"
)

func TestLearningFitsItsSchema(t *testing.T) {
	s := loadSchema(t, "learning")
	base := wire.Baseline{ID: 3, InForce: true, Created: time.Unix(1e9, 0).UTC(), Kind: "renewed", Subject: "t1.he.suction", By: "A", Note: "n", FirstTurn: 1, LastTurn: 600, Cells: 4, Measures: 300, Skid: "ab", Doubts: []string{"d"}, Unusable: "u"}
	for _, l := range []wire.Learning{
		{Version: 1, Skid: "k", State: "none", Coverage: []wire.Covered{}, Drifting: []wire.Drifting{{Subject: "t1.he", Measure: "n_exp_late", Way: "up", Limits: 1.2}}, Said: "nothing"},
		{Version: 1, Skid: "k", State: "running", Kind: "learnt", By: "A", Turns: 3, Want: 600, Said: "s", Drifting: []wire.Drifting{}, InForce: &base, Withheld: 2, Coverage: []wire.Covered{
			{Throw: "t1", LoadStep: -2, Want: 600, Missing: "600 steady turns"},
			{Throw: "t1", LoadStep: 1, Inferred: true, Turns: 50, Want: 600, Usable: true, Ratio: &[2]float64{1.8, 2.2}, RPM: &[2]float64{600, 900}, Ps: &[2]float64{7, 9}}}},
		{Version: 1, Skid: "k", State: "proposed", Kind: "added", Proposed: &wire.Baseline{Doubts: []string{}}, Coverage: []wire.Covered{}, Drifting: []wire.Drifting{}, Said: "s"},
	} {
		fits(t, s, l)
	}
	for _, bad := range []wire.Learning{{Version: 1, Skid: "k", State: "done", Coverage: []wire.Covered{}, Drifting: []wire.Drifting{}, Said: "s"}, {Version: 1, Skid: "k", State: "none", Drifting: []wire.Drifting{}, Said: "s"}} {
		if s.check(encode(t, bad)) == nil {
			t.Errorf("%+v fits", bad)
		}
	}
}
