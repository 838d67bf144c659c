package duty

import (
	"math"
	"testing"

	"lapwing/internal/measure"
)

// A feature for the eye has no baseline; one that the duty has been taken out of already has one value, whatever the duty
// did while it was learnt.
func TestFlatAndDisplayFeatures(t *testing.T) {
	layout := measure.Layout{
		{Subject: "t1.he.suction.opens", Name: "impact_norm_ln", Scale: 1, Class: measure.Vibration, Flat: true},
		{Subject: "t1.he.suction.opens", Name: "impact_ln", Scale: 1, Class: measure.Vibration},
		{Subject: "t1.he.suction.opens", Name: "crest", Scale: 1, Class: measure.Vibration, Display: true},
	}
	l := NewLearner(layout, LearnConfig{})
	for i := range 600 {
		r := 2 + 0.6*math.Sin(float64(i)/40)
		x := 1 + 0.5*math.Log(r/2)
		l.Add(0, Point{State: Steady, RPM: 750, Ps: 20e5, Pd: 20e5 * r, OwnPs: math.NaN(), OwnPd: math.NaN()},
			&measure.Vector{Turn: int64(i), V: []float64{x, x, x}})
	}
	b, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	ref, err := b.Reference(layout)
	if err != nil {
		t.Fatal(err)
	}
	v := measure.Vector{V: []float64{1.1, 1.1, 1.1}}
	at := func(ratio float64) []Deviation {
		return ref.Deviate(nil, 0, Point{State: Steady, RPM: 750, Ps: 20e5, Pd: 20e5 * ratio}, &v)
	}
	lo, hi := at(1.6), at(2.5)
	if len(lo) != 2 || len(hi) != 2 {
		t.Fatalf("%d and %d deviations, want those of the two that are judged", len(lo), len(hi))
	}
	if lo[0].Expected != hi[0].Expected {
		t.Errorf("flat feature: expected %g at ratio 1.6, %g at 2.5", lo[0].Expected, hi[0].Expected)
	}
	if d := hi[1].Expected - lo[1].Expected; math.Abs(d-0.5*math.Log(2.5/1.6)) > .02 {
		t.Errorf("regressed feature: moves by %g with the ratio, want %g", d, 0.5*math.Log(2.5/1.6))
	}
}
