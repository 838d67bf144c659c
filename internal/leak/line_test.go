package leak_test

import (
	"math"
	"testing"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/model"
)

// quick is the gas bench sampled at half the rate, for tests of every day.
func quick() *line {
	b := benches[0]
	b.rate = 25600
	return newLine(&b)
}

// Three leaks and all sensor errors at once, through every stage to the deviation. TestSurvey has the figures; the bound
// here is some three standard deviations of a median of 50 turns at this sampling rate.
func TestLeaksThroughTheLine(t *testing.T) {
	l := quick()
	l.learn(t, l.still(1, full, 90))
	u := l.unit(t, 20)
	v := l.still(2, full, 64)
	v.phase, v.gain = .5, .01
	v.changes = []model.Change{{What: model.PressureZero, To: .01 * l.ps}}
	want := [5]float64{3, 0, 0, 2, 2}
	for j, w := range want {
		if w > 0 {
			v.changes = append(v.changes, open(j, w*u[j]))
		}
	}
	var x [5][]float64
	var devs []duty.Deviation
	l.turns(t, v, func(p duty.Point, v *measure.Vector) {
		devs = l.ref.Deviate(devs[:0], 0, p, v)
		for _, d := range devs {
			for j := range paths {
				if d.Seen && d.Feature == l.layout.Find(paths[j], "leak_percent") {
					x[j] = append(x[j], 100*d.Residual)
				}
			}
		}
	}, nil)
	for j := range x {
		got := middle(x[j])
		t.Logf("%s %.2f %%, true %.0f, median of %d turns", paths[j], got, want[j], len(x[j]))
		if len(x[j]) < 45 || math.Abs(got-want[j]) > .45 {
			t.Errorf("%s: %.2f %% in %d turns, true %.0f", paths[j], got, len(x[j]), want[j])
		}
	}
}

// The per cent are what the model loses through its valves by its own books, over what it delivered while sound.
func TestPercentIsTheModelsLoss(t *testing.T) {
	l := quick()
	run := func(changes ...model.Change) (percent [5]float64, lost [4]float64, delivered [2]float64) {
		v := l.still(4, full, 28)
		v.changes = changes
		var x [5][]float64
		n := 0.0
		l.turns(t, v, func(_ duty.Point, v *measure.Vector) {
			for j := range paths {
				x[j] = append(x[j], 100*v.V[l.layout.Find(paths[j], "leak_percent")])
			}
		}, func(tr model.Truth) {
			lost[2*tr.End] += tr.Leaked.Suction
			lost[2*tr.End+1] += tr.Leaked.Discharge
			delivered[tr.End] += tr.Delivered
			n += .5 // of two ends
		})
		for j := range lost {
			lost[j] /= n
		}
		for j := range x {
			percent[j] = middle(x[j])
		}
		return percent, lost, [2]float64{delivered[0] / n, delivered[1] / n}
	}
	before, none, sound := run()
	after, lost, _ := run(open(0, 12), open(3, 12))
	for _, j := range []int{0, 3} {
		want := 100 * (lost[j] - none[j]) / sound[j/2]
		got := after[j] - before[j]
		t.Logf("%s: 12 mm² read %.2f %%, by the model's books %.2f %%", paths[j], got, want)
		if math.Abs(got/want-1) > .12 {
			t.Errorf("%s: %.2f %%, by the model's books %.2f %%", paths[j], got, want)
		}
	}
}
