package verdict

import (
	"math"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// The interval of reference/leaks.md section 4, ±2√(block sd² + (.03 A)² + (.2 %)²), by hand: sd 0.1 %, leak 2 %.
func TestLeakInterval(t *testing.T) {
	if got, want := leakError(.001, .02, leakFloor), math.Sqrt(1e-6+.36e-6+4e-6); math.Abs(got-want) > 1e-15 {
		t.Errorf("%g, want %g", got, want)
	}
	l := measure.NewLayout(measure.Machine{Throws: []measure.Throw{{ID: "t1", Ends: [2]measure.End{{Works: true}, {Works: true}}}}})
	j := New(l, Config{})
	p := places(l)[0].ends[0].path[suction]
	j.dev[p.percent] = &duty.Deviation{Feature: p.percent, Value: .04, Residual: .02, Spread: .001}
	j.dev[p.area] = &duty.Deviation{Feature: p.area, Value: 12e-6, Residual: 6e-6, Spread: .3e-6}
	area, aSD, loss, lSD := j.sized(p, 0)
	// 0.2 % are 0.6 mm² here.
	if wantA := math.Sqrt(.09+.18*.18+.36) * 1e-6; area != 6e-6 || math.Abs(aSD/wantA-1) > 1e-12 || loss != .02 || math.Abs(lSD-math.Sqrt(5.36e-6)) > 1e-15 {
		t.Errorf("%g ± %g m², %g ± %g", area, aSD, loss, lSD)
	}
	if s := j.sayLeak(p, 0, "t1.he.suction"); s != "leak area of t1.he.suction 6 mm² (4.61 to 7.39), 2 % of its throughput (1.54 to 2.46)" {
		t.Error(s)
	}
	j.dev[p.percent] = nil
	if _, sd, loss, _ := j.sized(p, 0); !math.IsNaN(loss) || math.Abs(sd/(math.Hypot(.3, .18)*1e-6)-1) > 1e-12 {
		t.Errorf("throughput not known: %g, area ± %g", loss, sd)
	}
}

// The structural limits of reference/leaks.md section 2.
func TestRingsThatReadAsSuction(t *testing.T) {
	p := &place{id: "t1", rings: pathPlace{area: 1}}
	p.ends[0].works, p.ends[1].works = true, true
	both := sight{n: [2]int{enough, enough}}
	blind := both
	blind.noRings = true
	idle := sight{n: [2]int{enough, 0}}
	for _, c := range []struct {
		name     string
		s        *sight
		end, grp int
		want     []string
	}{
		{"both ends at work", &both, crank.HE, suction, nil},
		{"both ends at work", &both, crank.CE, suction, []string{"t1.packing"}},
		{"late closing on both", &blind, crank.HE, suction, []string{"t1.rings"}},
		{"late closing on both", &blind, crank.CE, suction, []string{"t1.rings", "t1.packing"}},
		{"late closing on both", &blind, crank.HE, discharge, nil},
		{"crank end idle", &idle, crank.HE, suction, []string{"t1.rings"}},
	} {
		if got := c.s.structural(p, c.end, c.grp); !slices.Equal(got, c.want) {
			t.Errorf("%s, %s %s: %v, want %v", c.name, endName[c.end], groupName[c.grp], got, c.want)
		}
	}
	p.ends[1].works = false // single-acting: the rings leak to the blind side
	if got := idle.structural(p, crank.HE, suction); !slices.Equal(got, []string{"t1.rings"}) {
		t.Errorf("single-acting: %v", got)
	}
	f := Finding{Ambiguous: []string{"t1.rings"}}
	settle, _ := advice(&trial{kind: Leaking, h: hLeak, group: suction}, &f)
	if !strings.Contains(strings.Join(settle, " "), "Both ends alike suggest the rings") {
		t.Errorf("not said: %v", settle)
	}
}

// Four groups that read alike are no four leaks; one that reads more leaks by the rest.
func TestFourAlike(t *testing.T) {
	l := measure.NewLayout(measure.Machine{Throws: []measure.Throw{{ID: "t1", Ends: [2]measure.End{{Works: true}, {Works: true}}}}})
	p := places(l)[0]
	dev := make([]*duty.Deviation, len(l))
	for i, r := range []float64{.013, .01, .011, .04} {
		at := p.ends[i/2].path[i%2].percent
		dev[at] = &duty.Deviation{Feature: at, Value: .03 + r, Residual: r, Spread: .001, Z: r / .001}
	}
	if c := alike(&p, dev); c != .01 {
		t.Errorf("%g in common, want 0.01", c)
	}
	s := look(&p, l, dev, true)
	for i, want := range []float64{.003, 0, .001, .03} { // over √(0.001² + (0.3·0.01)²)
		if want = math.Min(12, want/math.Hypot(.001, .003)); math.Abs(s.areaZ[i]-want) > 1e-9 {
			t.Errorf("path %d: %g spreads, want %g", i, s.areaZ[i], want)
		}
	}
	dev[p.ends[1].path[discharge].percent].Residual = -.002
	if c := alike(&p, dev); c != 0 {
		t.Errorf("one sound group: %g in common", c)
	}
}
