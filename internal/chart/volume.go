package chart

import (
	"fmt"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// PV draws pressure over volume of both ends.
func PV(p Picture, o Options) (*Drawing, error) {
	return overVolume(p, o, false)
}

// LogPV draws the same on logarithmic axes, with the line fitted to each closed stroke and its exponent.
func LogPV(p Picture, o Options) (*Drawing, error) {
	return overVolume(p, o, true)
}

func overVolume(p Picture, o Options, log bool) (*Drawing, error) {
	now, err := p.first()
	if err != nil {
		return nil, err
	}
	title, name := ": pressure over volume", "pv"
	if log {
		title, name = ": log pressure over log volume", "log_pv"
	}
	d, err := newDrawing(o, now.Name+title, now.About, 170, 125)
	if err != nil {
		return nil, err
	}
	pl := d.p.blank()
	pl.X.Label.Text, pl.Y.Label.Text = "volume, litres", "pressure, bar abs"
	x, y := noSpan(), noSpan()
	take := func(c *Cylinder) {
		for _, end := range c.Ends {
			if end == nil {
				continue
			}
			for i := range end.P {
				if v := end.P[i]; finite(v) && (!log || v > 0) {
					y.take(v * barPerPa)
					x.take(end.V[i] * litres)
				}
			}
		}
	}
	for i := range p.Turns {
		take(&p.Turns[i])
	}
	if p.Reference != nil {
		take(p.Reference)
	}
	if x.empty() || y.empty() {
		return nil, fmt.Errorf("chart: %s has no pressure in this turn", now.Name)
	}
	if log {
		pl.X.Min, pl.X.Max, pl.Y.Min, pl.Y.Max = x.lo/1.08, x.hi*1.08, y.lo/1.12, y.hi*1.25
		pl.X.Scale, pl.Y.Scale = plot.LogScale{}, plot.LogScale{}
		pl.X.Tick.Marker, pl.Y.Tick.Marker = decades{}, decades{}
	} else {
		pl.X.Min, pl.X.Max = x.wide(.03, .03)
		pl.X.Min = math.Min(0, pl.X.Min)
		pl.Y.Min, pl.Y.Max = y.wide(.05, .12)
		pl.X.Tick.Marker, pl.Y.Tick.Marker = few(8), few(7)
	}
	d.p.thinGrid(pl, true, true)
	for e, end := range now.Ends {
		if end == nil {
			continue
		}
		pl.Add(rules{y: positive(log, end.LinePs*barPerPa, end.LinePd*barPerPa), style: draw.LineStyle{Color: thin(d.p.end[e], .55), Width: vg.Points(.6), Dashes: []vg.Length{vg.Points(1), vg.Points(2)}}})
	}
	d.ends(pl, p, func(c *Cylinder, end *End, style draw.LineStyle) curve {
		from, to := oneTurn(c)
		return curve{x: func(i int) float64 { return end.V[from+i] * litres },
			y: func(i int) float64 {
				if v := end.P[from+i] * barPerPa; !log || v > 0 {
					return v
				}
				return nan
			}, n: to - from, style: style}
	})
	if log {
		for e, end := range now.Ends {
			if end == nil {
				continue
			}
			for k, s := range end.Strokes {
				d.fitted(pl, end, s, k, e)
			}
		}
	}
	pl.Add(backing{d.p.ground})
	d.rows = []row{{name: name, plot: pl, share: 1, log: log}}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// fitted draws the line of a closed stroke through the middle of its points, a little beyond both ends.
func (d *Drawing) fitted(pl *plot.Plot, end *End, s Stroke, stroke, e int) {
	if s.To-s.From < 2 || !finite(s.N) {
		return
	}
	lnV, lnP, n := 0.0, 0.0, 0
	v := noSpan()
	for i := s.From; i < s.To; i++ {
		if p := end.P[i]; p > 0 && finite(p) {
			lnV, lnP, n = lnV+math.Log(end.V[i]), lnP+math.Log(p), n+1
			v.take(end.V[i])
		}
	}
	if n < 2 {
		return
	}
	lnV, lnP = lnV/float64(n), lnP/float64(n)
	at := func(vol float64) float64 { return math.Exp(lnP-s.N*(math.Log(vol)-lnV)) * barPerPa }
	reach := []float64{v.lo * .97, v.hi * 1.03}
	pl.Add(curve{x: func(i int) float64 { return reach[i] * litres }, y: func(i int) float64 { return at(reach[i]) }, n: 2,
		style: draw.LineStyle{Color: d.p.ink, Width: vg.Points(.7)}})
	along := [2]float64{.62, .38}[e] // the two ends' words at different heights, for their lines lie close together
	mid := v.lo * math.Pow(v.hi/v.lo, along)
	name := [2]string{"HE", "CE"}[e] + [2]string{" compression", " expansion"}[stroke]
	style := d.p.words(7.5, d.p.end[e], draw.XLeft, draw.YBottom)
	dx, dy := vg.Points(5), vg.Points(3)
	if stroke == 1 {
		style.XAlign, style.YAlign, dx, dy = draw.XRight, draw.YTop, -dx, -dy
	}
	pl.Add(label{x: mid * litres, y: at(mid), text: fmt.Sprintf("%s n = %s", name, number(s.N, 3)), style: style, dx: dx, dy: dy, ground: d.p.ground})
}

// oneTurn gives the grid points from 0° to 360°, both included as far as they are there.
func oneTurn(c *Cylinder) (from, to int) {
	n := 0
	for _, end := range c.Ends {
		if end != nil {
			n = len(end.P)
		}
	}
	from = max(0, int(math.Ceil(-c.Lo/c.Step-1e-9)))
	to = min(n, int(math.Floor((360-c.Lo)/c.Step+1e-9))+1)
	return min(from, n), max(from, to)
}

func positive(only bool, v ...float64) (out []float64) {
	for _, x := range v {
		if finite(x) && (!only || x > 0) {
			out = append(out, x)
		}
	}
	return out
}

// decades are ticks at 1, 2 and 5 times the powers of ten, and finer ones where that gives too few.
type decades struct{}

// Ticks implements plot.Ticker.
func (decades) Ticks(lo, hi float64) []plot.Tick {
	if !(lo > 0 && hi > lo) {
		return nil
	}
	sets := [][]float64{{1, 2, 5}, {1, 1.5, 2, 3, 4, 5, 6, 8}, {1, 1.2, 1.4, 1.6, 1.8, 2, 2.5, 3, 3.5, 4, 4.5, 5, 6, 7, 8, 9}}
	var out []plot.Tick
	for _, set := range sets {
		out = out[:0]
		for e := math.Floor(math.Log10(lo)); e <= math.Ceil(math.Log10(hi)); e++ {
			for _, m := range set {
				if v := m * math.Pow(10, e); v >= lo*(1-1e-12) && v <= hi*(1+1e-12) {
					out = append(out, plot.Tick{Value: v, Label: plain(v)})
				}
			}
		}
		if len(out) >= 4 {
			break
		}
	}
	return out
}
