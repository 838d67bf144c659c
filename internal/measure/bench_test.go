package measure_test

import (
	"testing"

	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/turn"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

// One throw of the modelled machine, openings apart and in each other; windows are tracked before, as they are at work.
func BenchmarkModelTurns(b *testing.B) {
	r := windowtest.Run{Ratio: 2.2, RPM: 900, Seconds: 6, Seed: 2, Changes: []model.Change{
		{At: 3.5, What: model.LoadStep, To: windowtest.Pocket},
		{At: 4, Over: 2, What: model.DischargePressure, Where: "1", To: 20e5 * 4.4}}}
	sk := r.Skid()
	g := windowtest.Gas()
	m := measure.New(measure.Config{Machine: machineOf(sk), Atmosphere: sk.Machine.Atmosphere})
	tr := window.NewTracker(window.Config{})
	type one struct {
		t  *turn.Turn
		w  window.Result
		mi []measure.Input
	}
	var all []one
	r.Turns(b, .6, func(tn windowtest.Turn) {
		line := tn.Process.Stages[0]
		p, err := g.Duty(line.Ps, line.Ts, line.Pd)
		if err != nil {
			b.Fatal(err)
		}
		c := sk.CylinderAt(0, tn.Process.Step)
		w := tr.Track(tn.Turn, []window.Input{{Cylinder: c, K: p.KV, LinePs: line.Ps, LinePd: line.Pd}})
		all = append(all, one{tn.Turn.Clone(), window.Result{Throws: append([]window.Throw(nil), w.Throws...)},
			[]measure.Input{{Cylinder: c, LinePs: line.Ps, LinePd: line.Pd, Ts: line.Ts, Td: line.Td,
				Gas: measure.Gas{R: p.R, Zs: p.Zs, Zd: p.Zd, KV: p.KV, KT: p.KT}}}})
	})
	var v measure.Vector
	b.ReportAllocs()
	n := 0
	for b.Loop() {
		o := all[n%len(all)]
		n++
		m.Measure(&v, o.t, o.w, o.mi)
	}
}
