package leak_test

import (
	"math"
	"testing"

	"lapwing/internal/crank"
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

// Three leaks at once, and all sensor errors at once, through every stage to the deviation. TestSurvey has the figures;
// the bounds here are some three standard deviations of one 64-turn median.
func TestLeaksThroughTheLine(t *testing.T) {
	l := quick()
	l.learn(t, l.still(1, full, 150))
	u := l.unit(t)
	read := func(v trip) (out [5]float64) {
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
			if len(x[j]) < 50 {
				t.Fatalf("%s: %d turns only", paths[j], len(x[j]))
			}
			out[j] = middle(x[j])
		}
		return out
	}
	v := l.still(2, full, 74)
	want := [5]float64{3, 0, 0, 2, 2}
	for j, w := range want {
		if w > 0 {
			v.changes = append(v.changes, open(j, w*u[j]))
		}
	}
	got := read(v)
	t.Logf("three at once %.2f, true %.0f", got, want)
	for j := range got {
		if math.Abs(got[j]-want[j]) > .35 {
			t.Errorf("%s: %.2f %%, true %.0f", paths[j], got[j], want[j])
		}
	}
	v = l.still(3, full, 74)
	v.phase, v.gain = .5, .01
	v.changes = []model.Change{{What: model.PressureZero, To: .01 * l.ps}}
	got = read(v)
	t.Logf("sensor errors read as %.2f", got)
	for j := range got {
		if math.Abs(got[j]) > .35 {
			t.Errorf("%s: sensor errors read as %.2f %%", paths[j], got[j])
		}
	}
}

// The per cent are what the model loses through its valves by its own books, over what it delivered while sound.
func TestPercentIsTheModelsLoss(t *testing.T) {
	l := quick()
	run := func(changes ...model.Change) (percent [5]float64, lost, delivered [2][2]float64) {
		v := l.still(4, full, 40)
		v.changes = changes
		var x [5][]float64
		n := 0.0
		l.turns(t, v, func(_ duty.Point, v *measure.Vector) {
			for j := range paths {
				x[j] = append(x[j], 100*v.V[l.layout.Find(paths[j], "leak_percent")])
			}
		}, func(tr model.Truth) {
			lost[tr.End][0] += tr.Leaked.Suction
			lost[tr.End][1] += tr.Leaked.Discharge
			delivered[tr.End][0] += tr.Delivered
			if tr.End == crank.HE {
				n++
			}
		})
		for e := range lost {
			lost[e][0], lost[e][1], delivered[e][0] = lost[e][0]/n, lost[e][1]/n, delivered[e][0]/n
		}
		for j := range x {
			percent[j] = middle(x[j])
		}
		return percent, lost, delivered
	}
	before, none, sound := run()
	for j := range 4 {
		after, lost, _ := run(open(j, 10))
		e, g := j/2, j%2
		want := 100 * (lost[e][g] - none[e][g]) / sound[e][0]
		got := after[j] - before[j]
		t.Logf("%s: 10 mm² read %.2f %%, by the model's books %.2f %%", paths[j], got, want)
		if math.Abs(got/want-1) > .12 {
			t.Errorf("%s: %.2f %%, by the model's books %.2f %%", paths[j], got, want)
		}
	}
}
