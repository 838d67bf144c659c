package window

import (
	"fmt"
	"math"
	"sort"
	"testing"

	"lapwing/internal/crank"
)

// duties are the loads the windows must follow: ratio, speed, pocket, unloader, late closing.
func duties() map[string]rig {
	out := map[string]rig{}
	for _, ratio := range []float64{1.8, 2.5, 3.6} {
		for _, rpm := range []float64{500, 750, 1000} {
			name := fmt.Sprintf("ratio %.1f, %g rpm", ratio, rpm)
			r := newRig(ratio, rpm)
			out[name] = r
			pocket := r
			pocket.cyl.Clearance = [2]float64{.45, .2}
			out[name+", pocket"] = pocket
			un := r
			un.idle[crank.CE] = true
			out[name+", CE unloaded"] = un
			late := r
			late.late = [2]float64{50, 50}
			out[name+", late closing"] = late
		}
	}
	return out
}

func (r rig) input() []Input {
	return []Input{{Cylinder: r.cyl, K: r.k, LinePs: r.ps, LinePd: r.pd}}
}

// The rig's springs close its suction valves up to 16° before the dead centre at 500 rpm (170–195° is usual, methods.md
// section 4.2): those closings lie outside their windows and are counted.
// Targets: openings inside ≥ 99.9 %, opening error median ≤ 0.4° and 95 % ≤ 1.2° (issue 4); closings ≥ 96 %,
// for the reason above and since hardly any has been heard yet.
func TestWindowsFollowTheDuty(t *testing.T) {
	var open, openIn, shut, shutIn int
	var errs []float64
	names := []string{}
	all := duties()
	for name := range all {
		names = append(names, name)
	}
	sort.Strings(names)
	for _, name := range names {
		s := all[name].solve()
		tr := NewTracker(Config{})
		for n := range int64(9) {
			res := tr.Track(s.turn(n), s.input())
			for e, end := range res.Throws[0].Ends {
				if s.idle[e] {
					if end.State != Idle {
						t.Errorf("%s: end %d is held open but %v", name, e, end.State)
					}
					continue
				}
				for k, w := range end.W {
					truth := s.truth[e][k]
					in := truth.hit >= w.Lo && truth.hit <= w.Hi
					if Event(k) == SuctionOpens || Event(k) == DischargeOpens {
						open++
						if in {
							openIn++
						} else {
							t.Logf("%s turn %d: end %d event %d hit %.1f outside [%.1f, %.1f] %v %s", name, n, e, k, truth.hit, w.Lo, w.Hi, w.State, w.Why)
						}
						if w.State != Following {
							t.Errorf("%s turn %d: end %d event %d is %v: %s", name, n, e, k, w.State, w.Why)
						}
						errs = append(errs, math.Abs(w.Angle-truth.lift))
						continue
					}
					shut++
					if in {
						shutIn++
					} else if n == 8 {
						t.Logf("%s: end %d event %d hit %.1f outside [%.1f, %.1f] %s", name, e, k, truth.hit, w.Lo, w.Hi, w.Why)
					}
				}
			}
		}
	}
	sort.Float64s(errs)
	median, p95 := errs[len(errs)/2], errs[len(errs)*95/100]
	t.Logf("openings inside %d/%d, closings inside %d/%d, |opening error| median %.2f°, 95 %% %.2f°", openIn, open, shutIn, shut, median, p95)
	if float64(openIn) < .999*float64(open) {
		t.Errorf("openings inside their windows: %d of %d", openIn, open)
	}
	if float64(shutIn) < .96*float64(shut) {
		t.Errorf("closings inside their windows: %d of %d", shutIn, shut)
	}
	if !(median <= .4 && p95 <= 1.2) {
		t.Errorf("opening error: median %.2f°, 95 %% %.2f°", median, p95)
	}
}
