package station

import (
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
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

// When values leave, the tape must say so: what a clip gives back in a review is what the line saw, second by second, with
// nothing of before in place of what was not known.
func TestValuesThatLeaveHaveLeftInAReviewToo(t *testing.T) {
	sk, err := skid.Load(filepath.Join("..", "..", "configs", "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	gone := skid.Line{Ps: nan, Pd: nan, Ts: nan, Td: nan}
	saw := []skid.Process{
		{Known: true, Step: 1, Stages: []skid.Line{{Ps: 8.1e5, Pd: 22e5, Ts: 293.15, Td: nan}}, Covers: map[string]float64{"t1.he.s1": 338.15}},
		{Known: true, Step: 1, Stages: []skid.Line{{Ps: nan, Pd: 22e5, Ts: 293.15, Td: nan}}},
		{Step: 1, Stages: []skid.Line{gone}},
		{Step: 1, Stages: []skid.Line{gone}},
		{Known: true, Step: 2, Stages: []skid.Line{{Ps: 8.2e5, Pd: 21e5, Ts: 293.15, Td: nan}}, Covers: map[string]float64{"t1.he.s1": 339.15}},
	}
	const rate = 1000
	dir := t.TempDir()
	tp, err := tape.Open(filepath.Join(dir, "tape.db"), tape.Options{Info: acq.Info{Rate: rate, Channels: 1, Bits: 24}, Skid: sk.Raw, MaxBytes: 64 << 20, Queue: time.Minute})
	if err != nil {
		t.Fatal(err)
	}
	defer tp.Close()
	for i, p := range saw {
		tp.Process(int64(i*rate), onTape(quantise(p))) // before its samples: one block fills a segment here
		tp.Append(&acq.Block{Seq0: int64(i * rate), N: rate, Counts: [][]int32{make([]int32, rate)}})
	}
	if err := tp.Flush(t.Context()); err != nil {
		t.Fatal(err)
	}
	if _, err := tp.Protect(tape.Clip{ID: "c", Reason: "test", From: 0, To: int64(len(saw) * rate)}); err != nil {
		t.Fatal(err)
	}
	if err := tp.Flush(t.Context()); err != nil {
		t.Fatal(err)
	}
	if _, err := tp.ExportClip(filepath.Join(dir, "c"), "c"); err != nil {
		t.Fatal(err)
	}
	back, err := readProcess(filepath.Join(dir, "c.process.csv"), sk)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range saw {
		got := back(float64(i) + 0.5)
		if got.Known != want.Known || want.Known && got.Step != want.Step {
			t.Errorf("second %d: %+v, the line saw %+v", i, got, want)
			continue
		}
		if !want.Known {
			continue
		}
		l, w := got.Stages[0], want.Stages[0]
		for k, x := range [][2]float64{{l.Ps, w.Ps}, {l.Pd, w.Pd}, {l.Ts, w.Ts}, {got.Covers["t1.he.s1"], want.Covers["t1.he.s1"]}} {
			if math.IsNaN(x[0]) != math.IsNaN(x[1]) || math.Abs(x[0]-x[1]) > 1e-6 {
				t.Errorf("second %d, value %d: %v, the line saw %v", i, k, x[0], x[1])
			}
		}
	}
	if p := onTape(skid.Process{}); p.Known {
		t.Error("what never was known leaves a row")
	}
}
