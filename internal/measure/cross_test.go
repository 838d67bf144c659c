package measure_test

import (
	"testing"

	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

// Two modelled throws under load swings: no opening of throw 1 is taken for what arrives of throw 2; and when no valve of
// throw 1 is felt at all, nothing that arrives is booked as an impact of it.
func TestTwoThrowsHearEachOther(t *testing.T) {
	for _, mute := range []bool{false, true} {
		r := windowtest.Run{Ratio: 2.5, RPM: 800, Seconds: 1.15, Seed: 1, Throws: 2}
		if *sweep {
			r = swinging(5, 40)
			r.Throws = 2
		}
		if mute {
			r.Params = func(p *model.Params) {
				p.Mute = map[string]bool{}
				for id := range p.Valves {
					p.Mute[id] = id[:2] == "t1"
				}
			}
		}
		turns, booked, taken := 0, 0, 0
		each(t, r, func(_ int64, _ windowtest.Turn, _ window.Result, v *measure.Vector, l measure.Layout) {
			turns++
			for e, end := range []string{"t1.he.", "t1.ce."} {
				for _, k := range []window.Event{window.SuctionOpens, window.DischargeOpens} {
					if v.Marks[0][e][k].Sharing == measure.CrossTalk {
						taken++
					}
					if v.Why[l.Find(end+measure.EventName(k), "impact_ln")] == "" {
						booked++
					}
				}
			}
		})
		t.Logf("throw 1 felt: %t; %d turns, %d impacts of openings booked, %d taken for cross-talk", !mute, turns, booked, taken)
		if turns < 5 || !mute && (taken > 0 || booked < 4*turns-turns/10) || mute && booked > 0 {
			t.Errorf("throw 1 felt: %t; %d turns, %d impacts of openings booked, %d taken for cross-talk", !mute, turns, booked, taken)
		}
	}
}
