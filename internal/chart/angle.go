package chart

import (
	"errors"
	"fmt"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

const (
	barPerPa = 1e-5
	gPerSI   = 1 / 9.80665
	kN       = 1e-3
	litres   = 1e3
)

const windowKey = "\nwindows: solid edge, event found in this turn; broken edge, moved by the model; stroke, where it was found; triangle, where valves that seal would do it"

// Angle draws cylinder pressures over crank angle, below them the valves' windows in one lane an end, and below these
// each accelerometer on the same axis.
func Angle(p Picture, o Options) (*Drawing, error) {
	now, err := p.first()
	if err != nil {
		return nil, err
	}
	d, err := newDrawing(o, now.Name+": pressure and vibration over crank angle", now.About+windowKey, 240, 110+28*float64(len(now.Vib)))
	if err != nil {
		return nil, err
	}
	from, to := o.From, o.To
	if from == 0 && to == 0 {
		from, to = -30, 390
	}
	if !(to-from >= 5) {
		return nil, fmt.Errorf("chart: from %g to %g degrees is no range", from, to)
	}
	pressure, err := d.pressures(p, from, to)
	if err != nil {
		return nil, err
	}
	d.rows = append(d.rows, row{name: "pressure_bar_abs", plot: pressure, share: 60}, row{name: "windows", plot: d.lanes(now, from, to), share: 14})
	for k := range now.Vib {
		d.rows = append(d.rows, row{name: "vibration_g " + now.Vib[k].Channel, plot: d.vibration(p, k, from, to, k == len(now.Vib)-1), share: 24})
	}
	if len(now.Vib) == 0 {
		d.bottom(d.rows[1].plot)
	} else {
		d.rows[len(d.rows)-1].share += 9 // its axis
	}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// first is the turn looked at, found sound.
func (p *Picture) first() (*Cylinder, error) {
	if len(p.Turns) == 0 {
		return nil, errors.New("chart: no turn to draw")
	}
	all := append([]Cylinder(nil), p.Turns...)
	if p.Reference != nil {
		all = append(all, *p.Reference)
	}
	for i := range all {
		if err := all[i].check(); err != nil {
			return nil, err
		}
	}
	return &p.Turns[0], nil
}

func (c *Cylinder) check() error {
	n := -1
	same := func(what string, v []float64) error {
		if n < 0 {
			n = len(v)
		}
		if len(v) != n {
			return fmt.Errorf("chart: %s: %s has %d points, the others %d", c.Name, what, len(v), n)
		}
		return nil
	}
	if !(c.Step > 0) || !finite(c.Lo) {
		return fmt.Errorf("chart: %s: no angle grid", c.Name)
	}
	for e, end := range c.Ends {
		if end == nil {
			continue
		}
		if err := errors.Join(same(endNames[e]+" pressure", end.P), same(endNames[e]+" volume", end.V)); err != nil {
			return err
		}
		for _, s := range end.Strokes {
			if s.From < 0 || s.To < s.From || s.To > n {
				return fmt.Errorf("chart: %s: stroke from %d to %d of %d points", c.Name, s.From, s.To, n)
			}
		}
	}
	for i := range c.Vib {
		if err := same(c.Vib[i].Channel, c.Vib[i].Peak); err != nil {
			return err
		}
	}
	if c.Load != nil {
		if err := errors.Join(same("gas load", c.Load.Gas), same("pin load", c.Load.Pin)); err != nil {
			return err
		}
	}
	if n < 2 {
		return fmt.Errorf("chart: %s: nothing was measured in this turn", c.Name)
	}
	return nil
}

// angleAxis sets the common axis; its figures stand only under the lowest panel.
func (d *Drawing) angleAxis(pl *plot.Plot, from, to float64) {
	pl.X.Min, pl.X.Max = from, to
	step := 30.0
	for _, s := range []float64{1, 2, 5, 10, 15, 30} {
		if (to-from)/s <= 15 {
			step = s
			break
		}
	}
	pl.X.Tick.Marker = plot.TickerFunc(func(lo, hi float64) []plot.Tick {
		var out []plot.Tick
		for v := float64(int(lo/step)-1) * step; v <= hi; v += step {
			if v >= lo {
				out = append(out, plot.Tick{Value: v, Label: " "})
			}
		}
		return out
	})
	pl.X.Tick.Label.Font = typeface(1)
	pl.X.Tick.Length = vg.Points(2)
}

// bottom writes the figures under a panel.
func (d *Drawing) bottom(pl *plot.Plot) {
	inner := pl.X.Tick.Marker
	pl.X.Tick.Marker = plot.TickerFunc(func(lo, hi float64) []plot.Tick {
		t := inner.Ticks(lo, hi)
		for i := range t {
			t[i].Label = number(t[i].Value, 0)
		}
		return t
	})
	pl.X.Tick.Label.Font = typeface(8)
	pl.X.Label.Text = "crank angle after head-end dead centre, degrees"
}

// frame draws grid and dead centres.
func (d *Drawing) frame(pl *plot.Plot, ys bool) {
	d.p.thinGrid(pl, true, ys)
	pl.Add(rules{x: []float64{0, 180, 360}, style: draw.LineStyle{Color: d.p.faint, Width: vg.Points(.7)}})
}

func (d *Drawing) pressures(p Picture, from, to float64) (*plot.Plot, error) {
	pl := d.p.blank()
	d.angleAxis(pl, from, to)
	pl.Y.Label.Text = "pressure, bar abs"
	pl.Y.Tick.Marker = few(7)
	s := noSpan()
	each := func(c *Cylinder) {
		for _, end := range c.Ends {
			if end != nil {
				s.all(end.P, barPerPa)
			}
		}
	}
	for i := range p.Turns {
		each(&p.Turns[i])
	}
	if p.Reference != nil {
		each(p.Reference)
	}
	if s.empty() {
		return nil, fmt.Errorf("chart: %s has no pressure in this turn", p.Turns[0].Name)
	}
	pl.Y.Min, pl.Y.Max = s.wide(.04, .38) // the legend stands above the curves
	d.frame(pl, true)
	now := &p.Turns[0]
	for e, end := range now.Ends {
		if end == nil {
			continue
		}
		line := draw.LineStyle{Color: thin(d.p.end[e], .55), Width: vg.Points(.6), Dashes: []vg.Length{vg.Points(1), vg.Points(2)}}
		pl.Add(rules{y: []float64{end.LinePs * barPerPa, end.LinePd * barPerPa}, style: line})
	}
	d.ends(pl, p, func(c *Cylinder, end *End, style draw.LineStyle) curve {
		return overAngle(c.Lo, c.Step, end.P, barPerPa, style)
	})
	for e, end := range now.Ends {
		if end != nil && (finite(end.LinePs) || finite(end.LinePd)) {
			pl.Legend.Add("line pressures", rules{style: draw.LineStyle{Color: thin(d.p.end[e], .7), Width: vg.Points(.8), Dashes: []vg.Length{vg.Points(1), vg.Points(2)}}})
			break
		}
	}
	pl.Add(backing{d.p.ground})
	return pl, nil
}

// ends draws the reference, the others and the turn looked at, and their legend.
func (d *Drawing) ends(pl *plot.Plot, p Picture, of func(*Cylinder, *End, draw.LineStyle) curve) {
	if p.Reference != nil {
		for _, end := range p.Reference.Ends {
			if end != nil {
				pl.Add(of(p.Reference, end, d.p.referenceStroke()))
			}
		}
	}
	for i := len(p.Turns) - 1; i >= 0; i-- {
		for e, end := range p.Turns[i].Ends {
			if end != nil {
				pl.Add(of(&p.Turns[i], end, d.p.stroke(e, i == 0)))
			}
		}
	}
	for e, end := range p.Turns[0].Ends {
		if end != nil {
			pl.Legend.Add(endNames[e], curve{style: d.p.stroke(e, true)})
		}
	}
	if n := len(p.Turns) - 1; n > 0 {
		pl.Legend.Add(fmt.Sprintf("%d more turns", n), curve{style: draw.LineStyle{Color: thin(d.p.end[0], .4), Width: vg.Points(.6)}})
	}
	if p.Reference != nil {
		pl.Legend.Add("reference", curve{style: d.p.referenceStroke()})
	}
}

// lanes shows the windows as boxes, the found angle as a stroke and the expected one as a small hollow mark.
func (d *Drawing) lanes(c *Cylinder, from, to float64) *plot.Plot {
	pl := d.p.blank()
	d.angleAxis(pl, from, to)
	pl.Y.Min, pl.Y.Max = 0, 2
	pl.Y.Label.Text = "windows"
	pl.Y.Tick.Marker = plot.ConstantTicks([]plot.Tick{{Value: 1.5, Label: "HE"}, {Value: .5, Label: "CE"}})
	pl.Y.Tick.Length = 0
	d.frame(pl, false)
	pl.Add(rules{y: []float64{1}, style: draw.LineStyle{Color: d.p.grid, Width: vg.Points(.5)}})
	for e, end := range c.Ends {
		if end == nil {
			continue
		}
		base := float64(1 - e)
		for _, ev := range end.Events {
			d.event(pl, ev, base, d.p.end[e])
		}
	}
	return pl
}

func (d *Drawing) event(pl *plot.Plot, ev Event, base float64, c colour) {
	if finite(ev.Lo) && finite(ev.Hi) {
		b := box{x0: ev.Lo, x1: ev.Hi, y0: base + .12, y1: base + .56, fill: thin(c, .22), edge: draw.LineStyle{Color: thin(c, .9), Width: vg.Points(.6)}}
		if !ev.Suction {
			b.fill = thin(c, .5)
		}
		if !ev.Sure {
			b.edge.Dashes = []vg.Length{vg.Points(1.5), vg.Points(1.5)}
		}
		pl.Add(b)
	}
	at := ev.Angle
	if finite(ev.Angle) {
		pl.Add(curve{x: func(int) float64 { return ev.Angle }, y: func(i int) float64 { return base + .06 + .56*float64(i) }, n: 2, style: draw.LineStyle{Color: d.p.ink, Width: vg.Points(1)}})
	} else if at = (ev.Lo + ev.Hi) / 2; !finite(at) {
		return
	}
	if finite(ev.Expected) {
		pl.Add(pointer{x: ev.Expected, y: base + .12, style: draw.LineStyle{Color: d.p.ink, Width: vg.Points(.6)}})
	}
	pl.Add(label{x: at, y: base + .8, text: ev.name(), style: d.p.words(6.5, d.p.ink, draw.XCenter, draw.YCenter)})
}

func (e *Event) name() string {
	s := "d"
	if e.Suction {
		s = "s"
	}
	if e.Opens {
		s += " opens"
	} else {
		s += " closes"
	}
	if e.Shared {
		s += " (shared)"
	}
	return s
}

// vibration is one accelerometer, with the windows as bands behind it.
func (d *Drawing) vibration(p Picture, k int, from, to float64, last bool) *plot.Plot {
	pl := d.p.blank()
	d.angleAxis(pl, from, to)
	if last {
		d.bottom(pl)
	}
	now := &p.Turns[0]
	id := now.Vib[k].Channel
	pl.Y.Label.Text = id + ", g peak"
	pl.Y.Tick.Marker = few(3)
	s := noSpan()
	s.take(0)
	var same [][]float64
	var of []*Cylinder
	find := func(c *Cylinder) {
		for i := range c.Vib {
			if c.Vib[i].Channel == id {
				same, of = append(same, c.Vib[i].Peak), append(of, c)
				s.all(c.Vib[i].Peak, gPerSI)
			}
		}
	}
	for i := range p.Turns {
		find(&p.Turns[i])
	}
	turns := len(same)
	if p.Reference != nil {
		find(p.Reference)
	}
	if s.hi == 0 {
		s.hi = 1
	}
	pl.Y.Min, pl.Y.Max = 0, s.hi*1.08
	for e, end := range now.Ends {
		if end == nil {
			continue
		}
		for _, ev := range end.Events {
			if finite(ev.Lo) && finite(ev.Hi) {
				share := .14
				if !ev.Suction {
					share = .26
				}
				pl.Add(box{x0: ev.Lo, x1: ev.Hi, y0: nan, y1: nan, fill: thin(d.p.end[e], share)})
			}
		}
	}
	d.frame(pl, true)
	for i := turns; i < len(same); i++ {
		pl.Add(overAngle(of[i].Lo, of[i].Step, same[i], gPerSI, d.p.referenceStroke()))
	}
	for i := turns - 1; i >= 0; i-- {
		style := draw.LineStyle{Color: d.p.ink, Width: vg.Points(.8)}
		if i > 0 {
			style = draw.LineStyle{Color: d.p.faint, Width: vg.Points(.4)}
		}
		pl.Add(overAngle(of[i].Lo, of[i].Step, same[i], gPerSI, style))
	}
	return pl
}
