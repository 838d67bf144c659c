package station

import (
	"bytes"
	"context"
	"errors"
	"math"
	"strings"
	"testing"

	"lapwing/internal/crank"
)

// sealed is the motored machine with its valves shut for good: p·V^1.3 stays what it is. Everything is known of it in
// closed form.
func sealed(t testing.TB) *motored {
	cyl := rig(t).Throws[0].Cylinder
	m := &motored{bar: make([][]float64, motoredCycles)}
	for i := range motoredLen {
		deg := -180 + float64(i)*motoredStep
		m.angle = append(m.angle, deg)
		m.bar[0] = append(m.bar[0], 1.2*math.Pow(cyl.Volume(crank.HE, 180)/cyl.Volume(crank.HE, deg), 1.3))
	}
	for k := range m.bar {
		m.bar[k] = m.bar[0]
	}
	return m
}

func TestReviewOfASealedCylinder(t *testing.T) {
	sk := rig(t)
	path := sealed(t).record(t, sk)
	var bar bytes.Buffer
	turns, others, summary, err := reviewed(t, ReviewOptions{SkidFile: sk.File, Recording: path, Progress: &bar})
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(bar.String(), "%") || !strings.HasSuffix(bar.String(), "\r") {
		t.Errorf("no progress bar that goes away again: %q", bar.String())
	}
	for _, want := range []string{"measured only", "process values: none known", "t1.he windows:"} {
		if !strings.Contains(summary, want) {
			t.Errorf("the summary lacks %q:\n%s", want, summary)
		}
	}
	if len(others) > 0 {
		t.Errorf("records beside turns: %v", others)
	}
	valid := 0
	for _, r := range turns {
		if !r.Valid {
			continue
		}
		valid++
		end := r.Throws[0].Ends[0]
		if r.Throws[0].Step != 0 {
			t.Errorf("turn %d: load step %d; the blind end is no unloaded one", r.Turn, r.Throws[0].Step)
		}
		for _, ev := range end.Events {
			if strings.HasPrefix(ev.Event, "discharge") && ev.State != "not-delivering" || ev.Event == "suction.opens" && ev.State == "following" {
				t.Errorf("turn %d: %s is %s", r.Turn, ev.Event, ev.State)
			}
		}
		// The smoothing of half a grid step flattens the peak by 0.015 %; the work of a sealed cylinder is none.
		within(t, "peak, bar", end.Values["p_max_bar_abs"], 1.2*math.Pow(21.2, 1.3), 0.02)
		within(t, "least pressure, bar", end.Values["p_min_bar_abs"], 1.2, 1e-4)
		within(t, "work, J", end.Values["indicated_work_j"], 0, 0.05)
		within(t, "early exponent of compression", end.Values["n_comp_early"], 1.3, 1e-3)
		within(t, "late exponent of compression", end.Values["n_comp_late"], 1.3, 1e-3)
		within(t, "early exponent of expansion", end.Values["n_exp_early"], 1.3, 1e-3)
		within(t, "late exponent of expansion", end.Values["n_exp_late"], 1.3, 1e-3)
	}
	if valid < 100 {
		t.Errorf("%d valid turns", valid)
	}

	ctx, stop := context.WithCancel(t.Context())
	stop()
	if err := Review(ctx, ReviewOptions{SkidFile: sk.File, Recording: path}); !errors.Is(err, context.Canceled) || !strings.Contains(err.Error(), "stopped after 0 turns") {
		t.Errorf("a review that is stopped says %v", err)
	}
}
