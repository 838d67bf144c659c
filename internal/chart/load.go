package chart

import (
	"fmt"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// RodLoad draws gas load and combined load at the crosshead pin over crank angle, with the stated limits and where the
// pin load changes its direction.
func RodLoad(p Picture, o Options) (*Drawing, error) {
	now, err := p.first()
	if err != nil {
		return nil, err
	}
	if now.Load == nil {
		return nil, fmt.Errorf("chart: the rod load of %s is not known in this turn", now.Name)
	}
	l := now.Load
	about := now.About
	if finite(l.ReversalDeg) && finite(l.ReversalShare) {
		about = fmt.Sprintf("%s\nreversal %s°, lesser peak %s %% of the greater", about, number(l.ReversalDeg, 0), number(100*l.ReversalShare, 0))
	}
	d, err := newDrawing(o, now.Name+": rod load over crank angle", about, 200, 110)
	if err != nil {
		return nil, err
	}
	from, to := o.From, o.To
	if from == 0 && to == 0 {
		from, to = 0, 360
	}
	pl := d.p.blank()
	d.angleAxis(pl, from, to)
	d.bottom(pl)
	pl.Y.Label.Text = "kN, compression positive"
	pl.Y.Tick.Marker = few(8)
	s := noSpan()
	s.take(0)
	s.all(l.Gas, kN)
	s.all(l.Pin, kN)
	limits := positive(false)
	if l.RatedPush > 0 {
		limits = append(limits, l.RatedPush*kN)
		s.take(l.RatedPush * kN)
	}
	if l.RatedPull > 0 {
		limits = append(limits, -l.RatedPull*kN)
		s.take(-l.RatedPull * kN)
	}
	if p.Reference != nil && p.Reference.Load != nil {
		s.all(p.Reference.Load.Pin, kN)
	}
	pl.Y.Min, pl.Y.Max = s.wide(.05, .38) // the legend stands above the curves
	for _, r := range signs(l.Pin) {      // where the rod is pulled
		pl.Add(box{x0: now.Lo + r[0]*now.Step, x1: now.Lo + r[1]*now.Step, y0: pl.Y.Min, y1: 0, fill: thin(d.p.end[0], .1)})
	}
	d.frame(pl, true)
	pl.Add(rules{y: []float64{0}, style: draw.LineStyle{Color: d.p.ink, Width: vg.Points(.8)}})
	rated := rules{y: limits, style: draw.LineStyle{Color: d.p.severity[3], Width: vg.Points(.9), Dashes: []vg.Length{vg.Points(7), vg.Points(3)}}}
	pl.Add(rated)
	if p.Reference != nil && p.Reference.Load != nil {
		pl.Add(overAngle(p.Reference.Lo, p.Reference.Step, p.Reference.Load.Pin, kN, d.p.referenceStroke()))
		pl.Legend.Add("reference, at the pin", curve{style: d.p.referenceStroke()})
	}
	for i := len(p.Turns) - 1; i > 0; i-- {
		if q := p.Turns[i].Load; q != nil {
			pl.Add(overAngle(p.Turns[i].Lo, p.Turns[i].Step, q.Pin, kN, draw.LineStyle{Color: d.p.faint, Width: vg.Points(.4)}))
		}
	}
	gas := draw.LineStyle{Color: d.p.end[1], Width: vg.Points(1), Dashes: endDashes[1]}
	pin := draw.LineStyle{Color: d.p.end[0], Width: vg.Points(1.5)}
	pl.Add(overAngle(now.Lo, now.Step, l.Gas, kN, gas), overAngle(now.Lo, now.Step, l.Pin, kN, pin))
	pl.Legend.Add("gas and inertia, at the crosshead pin", curve{style: pin})
	pl.Legend.Add("gas alone", curve{style: gas})
	if len(limits) > 0 {
		pl.Legend.Add("rated", rated)
	}
	pl.Add(backing{d.p.ground})
	d.rows = []row{{name: "load_kn", plot: pl, share: 1}}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// signs gives the stretches, in grid points, in which a load is below zero.
func signs(v []float64) (out [][2]float64) {
	from := -1.0
	for i := range v {
		switch {
		case i == 0 && v[0] < 0:
			from = 0
		case i > 0 && v[i] < 0 && v[i-1] >= 0:
			from = float64(i-1) + v[i-1]/(v[i-1]-v[i])
		case i > 0 && v[i] >= 0 && v[i-1] < 0 && from >= 0:
			out = append(out, [2]float64{from, float64(i-1) + v[i-1]/(v[i-1]-v[i])})
			from = -1
		}
	}
	if from >= 0 {
		out = append(out, [2]float64{from, float64(len(v) - 1)})
	}
	return out
}
