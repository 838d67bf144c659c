package station

import (
	"encoding/json"
	"errors"
	"io"
	"math"
	"reflect"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// uneven runs the line on the modelled example, whose shaft has a ripple of its own whatever the skid file says, and
// gives the records with the dead centres that the shaft really passed, in degrees of error by throw and turn.
func uneven(t *testing.T, file string, ripple []skid.Ripple, s model.Script, block int, seconds float64) (recs []wire.Turn, off map[int64][]float64) {
	t.Helper()
	sk, err := skid.Parse("m.yaml", []byte(file))
	if err != nil {
		t.Fatal(err)
	}
	par, err := model.Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	par.Ripple = ripple
	src, err := acqmodel.Open(sk, s, acqmodel.Options{Seed: 5, Rate: 20480, BlockLen: block, Duration: time.Duration(seconds * 1e9), Params: &par})
	if err != nil {
		t.Fatal(err)
	}
	h, clock := newHeld(), rowClock{}
	line, err := NewLine(sk, src.Info(), h.at, LearnPlan{}, nil, alarm.New(AlarmTiming(sk)))
	if err != nil {
		t.Fatal(err)
	}
	emit := func(o *Output) { recs = append(recs, o.Record) }
	var b acq.Block
	for {
		err := src.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		for _, w := range clock.rows(&b, src.Info().Rate, src.Process) {
			h.put(w)
		}
		if err := line.Add(&b, emit); err != nil {
			t.Fatal(err)
		}
	}
	line.Flush(emit)
	truths := src.Truths()
	off = map[int64][]float64{}
	for _, r := range recs {
		for k, th := range r.Throws {
			if th.TimeS == nil {
				continue
			}
			best := math.Inf(1)
			for _, tr := range truths {
				if d := (*th.TimeS - tr.T0) * 6 * tr.RPM; tr.Throw == k && math.Abs(d) < math.Abs(best) {
					best = d
				}
			}
			off[r.Turn] = append(off[r.Turn], best)
		}
	}
	return recs, off
}

func edited(t *testing.T, edits ...string) string {
	t.Helper()
	edits = append(edits, "sampling_hz: 51200", "sampling_hz: 20480", "impact_band_hz: [2000, 20000]", "impact_band_hz: [2000, 8000]",
		"leak_band_hz: [10000, 20000]", "leak_band_hz: [5000, 8000]")
	var cuts [][2]string
	for i := 0; i < len(edits); i += 2 {
		cuts = append(cuts, [2]string{edits[i], edits[i+1]})
	}
	return string(exampleText(t, cuts...))
}

// The load step in force decides which ripple a turn gets, by the process values at the turn's own time: a shaft that
// runs as step 1 says stands right in step 1 and wrong in step 0; and the records are the same bytes however the stream
// was cut.
func TestTheLoadStepBringsItsOwnRipple(t *testing.T) {
	t.Parallel()
	shaft := []skid.Ripple{{Order: 1, Amp: 0.005, Phase: 140}, {Order: 2, Amp: 0.012, Phase: -60}}
	file := edited(t, "  - code: 1\n", "  - code: 1\n    ripple: [{order: 1, amplitude_percent: 0.5, phase_deg: 140}, {order: 2, amplitude_percent: 1.2, phase_deg: -60}]\n")
	s := model.Script{RPM: 900}.Add(2.2, 0, model.LoadStep, "", 1)
	recs, off := uneven(t, file, shaft, s, 512, 5)
	var right, wrong, seen float64
	for _, r := range recs {
		for k, e := range off[r.Turn] {
			if r.Throws[k].Step == 1 && off[r.Turn-1] != nil && *r.Throws[k].TimeS > 4 {
				right, seen = math.Max(right, math.Abs(e)), seen+1
			} else if r.Throws[k].Step == 0 {
				wrong = math.Max(wrong, math.Abs(e))
			}
		}
	}
	t.Logf("dead centres off by up to %.4f° in step 1, %.3f° in step 0", right, wrong)
	if seen < 10 || right > 0.03 || wrong < 0.3 {
		t.Errorf("step 1: up to %.4f° off over %.0f dead centres; step 0, whose ripple is another, %.3f°", right, seen, wrong)
	}
	again, _ := uneven(t, file, shaft, s, 7777, 5)
	a, _ := json.Marshal(recs)
	b, _ := json.Marshal(again)
	if !reflect.DeepEqual(a, b) {
		t.Error("cut into other blocks, the records differ")
	}
}

// With an inertia and no measured ripple the line computes it; the records then state ±0.3° instead of ±1.2° and the
// windows are narrower by just that on both sides.
func TestWindowsWidenByTheStatedUncertainty(t *testing.T) {
	shaft := []skid.Ripple{{Order: 2, Amp: 0.003, Phase: 70}}
	bare := func(more ...string) string {
		file := edited(t, more...)
		a, b := strings.Index(file, "  uncertainty_deg:"), strings.Index(file, "gas:\n")
		return file[:a] + file[b:]
	}
	s := model.Script{RPM: 900}
	widths := func(file string) (at map[string][2]float64, u float64) {
		recs, _ := uneven(t, file, shaft, s, 512, 2.5)
		at = map[string][2]float64{}
		r := recs[len(recs)-6]
		for _, th := range r.Throws {
			if th.AngleU == nil {
				t.Fatal("a turn without stated uncertainty")
			}
			u = *th.AngleU
			for _, e := range th.Ends {
				for _, ev := range e.Events {
					if ev.Window != nil {
						at[th.ID+e.End+ev.Event] = *ev.Window
					}
				}
			}
		}
		return at, u
	}
	wide, uWide := widths(bare())
	narrow, uNarrow := widths(strings.Replace(bare(), "phase:", "phase:\n  uncertainty_deg: 0.4", 1))
	if uWide != 1.2 || uNarrow != 0.4 || len(wide) < 8 || len(narrow) != len(wide) {
		t.Fatalf("±%g° and ±%g° stated, %d and %d windows", uWide, uNarrow, len(wide), len(narrow))
	}
	for k, w := range wide {
		n := narrow[k]
		if math.Abs(n[0]-w[0]-0.8) > 0.02 || math.Abs(w[1]-n[1]-0.8) > 0.02 {
			t.Errorf("%s: %v at ±1.2°, %v at ±0.4°: want 0.8° less on both sides", k, w, n)
		}
	}
	if _, u := widths(bare("  # inertia_kgm2: 38", "  inertia_kgm2: 38 #")); u != 0.3 {
		t.Errorf("with the inertia ±%g° are stated, want 0.3", u)
	}
}
