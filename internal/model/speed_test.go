package model

import (
	"math"
	"testing"

	"lapwing/internal/crank"
)

// TestValvesSuitTheirSpeed: Typical gives every machine valves for its own rated speed: from the slow and long stroke to the
// small and fast, at three quarters of it and at all of it, a group opens once, hits its stop at a few m/s, and shuts near
// its dead centre without flutter (bounds as in TestHealthyValvesBehave).
func TestValvesSuitTheirSpeed(t *testing.T) {
	t.Parallel()
	for _, rated := range []float64{250, 1800} {
		stroke := min(4.2/(2*rated/60), 0.4) // mean piston speed of 4.2 m/s where the stroke allows
		cyl := crank.Cylinder{Bore: 1.5 * stroke, Stroke: stroke, ConRod: 2.5 * stroke, PistonRod: .35 * stroke,
			Clearance: [2]float64{.16, .18}, MassPiston: 50, MassCrosshead: 40}
		for _, share := range []float64{0.75, 1} {
			rpm := rated * share
			m, err := New(bench(cyl, rated, 8e5, 22e5, 303, methane(), 1, 2), Script{RPM: rpm}, Options{Seed: 1, Rate: max(12800, 14.2*rated)})
			if err != nil {
				t.Fatal(err)
			}
			fill(m, 4.5*60/rpm)
			seen := 0
			for _, tr := range m.Truths() {
				if tr.Rev < 1 || tr.End != crank.HE {
					continue
				}
				seen++
				for what, v := range map[string][3]float64{
					"suction stop speed":   {tr.Suction.Open.Speed, 2.4, 6},
					"discharge stop speed": {tr.Discharge.Open.Speed, 3, 8},
					"suction closing":      {tr.Suction.Close.Impact - 180, -10, 14},
					"discharge closing":    {tr.Discharge.Close.Impact - 360, -8, 10},
				} {
					if !(v[0] >= v[1] && v[0] <= v[2]) {
						t.Errorf("rated %g, at %g rev/min: %s is %.2f, want %g to %g", rated, rpm, what, v[0], v[1], v[2])
					}
				}
				hard := 0
				for _, im := range tr.Impacts {
					if im.Speed > 0.8 {
						hard++
					}
				}
				if hard > 10 {
					t.Errorf("rated %g, at %g rev/min: %d hard impacts in a turn: the valves flutter", rated, rpm, hard)
				}
			}
			if seen < 1 {
				t.Errorf("rated %g: no turn", rated)
			}
		}
	}
}

// TestStopAndStart: the shaft runs down to a standstill and up again; while it stands it passes no mark, everything stays a
// number, and the ends come to rest at the pressure that their leaks let them have.
func TestStopAndStart(t *testing.T) {
	t.Parallel()
	sk := single()
	s := Script{}.Add(0.3, 0.4, Speed, "", 0).Add(1.2, 0.4, Speed, "", 740)
	m, err := New(sk, s, Options{Seed: 1, Rate: 12800})
	if err != nil {
		t.Fatal(err)
	}
	x := scaled(sk, "mark", collect(m, int(2.2*m.rate), []int{640}), 24)
	up := func(from, to float64) (n int) {
		for i := int(from * m.rate); i < int(to*m.rate); i++ {
			if x[i-1] < 2.5 && x[i] >= 2.5 {
				n++
			}
		}
		return n
	}
	if a, b, c := up(0.01, 0.3), up(0.72, 1.2), up(1.65, 2.2); a < 3 || b != 0 || c < 6 {
		t.Errorf("%d marks before the stop, %d while it stands, %d after it", a, b, c)
	}
	for _, tr := range m.Truths() {
		if !(tr.RPM > 0 && tr.Delivered > -1 && tr.Work > -1e6 && tr.Power < 1e6) {
			t.Errorf("turn %d: %+v", tr.Rev, tr)
		}
	}
	p := m.Process(2.2)
	if !(p.Stages[0].Td > 250) || len(p.Covers) == 0 {
		t.Errorf("readings %+v", p)
	}
	for id, v := range p.Covers {
		if !(v > 250 && v < 450) {
			t.Errorf("cover %s is at %g K", id, v)
		}
	}
	fill(m, 0.5)
	if tr := last(t, m, 0, crank.HE); math.Abs(tr.RPM-740) > 20 {
		t.Errorf("runs at %.0f rev/min after the start", tr.RPM)
	}
}
