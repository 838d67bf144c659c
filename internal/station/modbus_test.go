package station

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"lapwing/internal/measure"
	"lapwing/internal/plant"
	"lapwing/internal/skid"
	"lapwing/internal/tape"
)

// Every number of the register map is a measure of the machine, in the same unit: a measure that gets another name must
// not leave its registers empty without a word.
func TestEveryNumberOfTheRegistersIsAMeasure(t *testing.T) {
	files, err := filepath.Glob(filepath.Join("..", "..", "configs", "*.yaml"))
	if err != nil || len(files) == 0 {
		t.Fatal("no examples", err)
	}
	for _, f := range files {
		sk, err := skid.Load(f)
		if err != nil {
			t.Fatal(err)
		}
		measures := map[string]bool{}
		for _, d := range measure.NewLayout(measureMachine(sk)) {
			measures[d.Subject+" "+d.Name] = true
		}
		numbers := 0
		for _, e := range plant.NewMap(sk).Entries {
			if e.Type != "f32" || e.Subject == "" || strings.HasPrefix(e.Name, "found_") { // those are a finding's
				continue
			}
			numbers++
			if !measures[e.Subject+" "+e.Name] {
				t.Errorf("%s: %s has no measure %s", f, e.Subject, e.Name)
			}
		}
		if numbers < 20 {
			t.Errorf("%s: %d numbers", f, numbers)
		}
	}
}

// When values leave, the tape must say so: what a recording gives back is what the line saw.
func TestValuesThatLeaveAreKnownToHaveLeftOnTheTape(t *testing.T) {
	nan := math.NaN()
	gone := skid.Process{Step: 1, Stages: []skid.Line{{Ps: nan, Pd: nan, Ts: nan, Td: nan}}}
	if p := onTape(gone); !p.Known || !math.IsNaN(p.Stages[0].Ps) {
		t.Errorf("%+v", p)
	}
	if p := onTape(skid.Process{}); p.Known {
		t.Error("what never was known leaves a row")
	}
	rec := tape.ProcessRow{Stages: []tape.LineRow{{}}}
	if back := rec.Process(); !math.IsNaN(back.Stages[0].Pd) {
		t.Errorf("%+v", back)
	}
}
