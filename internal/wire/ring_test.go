package wire

import (
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// A record says what else rings in an event's window.
func TestRecordSaysWhatRings(t *testing.T) {
	sk := &skid.Skid{Throws: []skid.Throw{{ID: "t1"}}}
	v := measure.Vector{Marks: make([][2][window.Events]measure.Mark, 1)}
	v.Marks[0][crank.CE][window.DischargeOpens] = measure.Mark{Sharing: measure.OneSided, Knock: true}
	r := NewRecorder(sk, nil, 51200)
	rec := r.Record(&turn.Turn{Time: 1, Throws: make([]turn.Throw, 1)}, window.Result{Throws: make([]window.Throw, 1)}, &v, []duty.Point{{}})
	for e, end := range rec.Throws[0].Ends {
		for k, ev := range end.Events {
			ring, knock := "", false
			if e == crank.CE && window.Event(k) == window.DischargeOpens {
				ring, knock = "one-sided", true
			}
			if ev.Ring != ring || ev.Knock != knock {
				t.Errorf("%s %s: ring %q, knock %t", end.End, ev.Event, ev.Ring, ev.Knock)
			}
		}
	}
}
