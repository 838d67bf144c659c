package chart

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Over draws a measure over time with the band of its baseline, three spreads wide on both sides, and the alarms.
func (t Trend) Over(o Options) (*Drawing, error) {
	if len(t.Points) == 0 {
		return nil, errors.New("chart: no values to draw")
	}
	d, err := newDrawing(o, t.Title, t.About, 240, 90)
	if err != nil {
		return nil, err
	}
	zero := t.Points[0].At
	at := func(x time.Time) float64 { return x.Sub(zero).Seconds() }
	pl := d.p.blank()
	pl.Y.Label.Text = t.Unit
	pl.Y.Tick.Marker = few(6)
	s := t.most()
	if s.empty() {
		return nil, fmt.Errorf("chart: %s was not known at any time asked for", t.Title)
	}
	for _, p := range t.Points { // the band, unless that would flatten the rest
		if w := s.hi - s.lo; finite(p.Spread) && 3*p.Spread < 2*w {
			s.take(p.Expected - 3*p.Spread)
			s.take(p.Expected + 3*p.Spread)
		}
	}
	pl.X.Min, pl.X.Max = 0, at(t.Points[len(t.Points)-1].At)
	if pl.X.Max <= 0 {
		pl.X.Max = 1
	}
	pl.Y.Min, pl.Y.Max = s.wide(.06, .25)
	beyond := 0
	for _, p := range t.Points {
		if p.Value < pl.Y.Min || p.Value > pl.Y.Max {
			beyond++
		}
	}
	if beyond > 0 {
		d.about += fmt.Sprintf("\n%d of %d values lie beyond the axis", beyond, len(t.Points))
	}
	pl.X.Tick.Marker = clock{zero}
	pl.X.Label.Text = "UTC, from " + zero.UTC().Format("2006-01-02 15:04:05")
	band := thin(d.p.end[0], .16)
	for _, run := range bandRuns(t.Points) {
		pl.Add(area{run: run, at: at, fill: band})
	}
	d.p.thinGrid(pl, true, true)
	expected := draw.LineStyle{Color: thin(d.p.end[0], .8), Width: vg.Points(.8), Dashes: []vg.Length{vg.Points(4), vg.Points(2)}}
	value := draw.LineStyle{Color: d.p.ink, Width: vg.Points(1)}
	x := func(i int) float64 { return at(t.Points[i].At) }
	hasBand := false
	for _, p := range t.Points {
		hasBand = hasBand || finite(p.Expected)
	}
	pl.Add(curve{x: x, y: func(i int) float64 { return t.Points[i].Expected }, n: len(t.Points), style: expected})
	pl.Add(curve{x: x, y: func(i int) float64 { return t.Points[i].Value }, n: len(t.Points), style: value})
	pl.Legend.Add("measured", curve{style: value})
	if hasBand {
		pl.Legend.Add("expected at this duty, ±3 spreads", box{fill: thin(d.p.end[0], .4)})
	}
	pl.Legend.Left = true
	var marks []label
	for k, m := range t.Marks {
		c := d.p.severity[min(max(m.Severity, 0), 3)]
		if m.Severity < 1 {
			c = hex(0x8a9299)
		}
		line := draw.LineStyle{Color: c, Width: vg.Points(1.2)}
		switch m.Severity { // told apart without colours too
		case 1:
			line.Dashes = []vg.Length{vg.Points(1.5), vg.Points(1.5)}
		case 2:
			line.Dashes = []vg.Length{vg.Points(6), vg.Points(2)}
		case 3:
			line.Width = vg.Points(2)
		}
		pl.Add(rules{x: []float64{at(m.At)}, style: line})
		marks = append(marks, label{x: at(m.At), y: pl.Y.Max, text: m.Text, style: d.p.words(7.5, d.p.ink, draw.XLeft, draw.YTop), dx: vg.Points(3), dy: -vg.Points(2 + 9*float64(k%3)), ground: d.p.ground})
	}
	for i := range marks {
		pl.Add(marks[i])
	}
	pl.Add(backing{d.p.ground})
	d.rows = []row{{name: "trend", plot: pl, share: 1}}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// lone is the share of values that may lie beyond an axis: single turns in which the load steps over.
const lone = .005

// most is what nearly all values lie within, and all that was expected.
func (t *Trend) most() span {
	var v []float64
	for _, p := range t.Points {
		if finite(p.Value) {
			v = append(v, p.Value)
		}
	}
	slices.Sort(v)
	s := noSpan()
	cut := int(lone * float64(len(v)))
	s.all(v[cut:len(v)-cut], 1)
	whole := noSpan()
	whole.all(v, 1)
	if whole.hi-whole.lo < 2*(s.hi-s.lo) { // nothing stands alone
		s = whole
	}
	for _, p := range t.Points {
		s.take(p.Expected)
	}
	return s
}

// bandRuns cuts the points where nothing is expected.
func bandRuns(p []TrendPoint) (out [][]TrendPoint) {
	from := -1
	for i := 0; i <= len(p); i++ {
		ok := i < len(p) && finite(p[i].Expected) && finite(p[i].Spread)
		if ok && from < 0 {
			from = i
		}
		if !ok && from >= 0 {
			out, from = append(out, p[from:i]), -1
		}
	}
	return out
}

// area is the band between expected minus and plus three spreads.
type area struct {
	run  []TrendPoint
	at   func(time.Time) float64
	fill colour
}

// Plot implements plot.Plotter.
func (a area) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	var pts []vg.Point
	for _, x := range a.run {
		pts = append(pts, vg.Point{X: fx(a.at(x.At)), Y: fy(x.Expected + 3*x.Spread)})
	}
	for i := len(a.run) - 1; i >= 0; i-- {
		x := a.run[i]
		pts = append(pts, vg.Point{X: fx(a.at(x.At)), Y: fy(x.Expected - 3*x.Spread)})
	}
	if pts = c.ClipPolygonXY(pts); len(pts) > 2 {
		c.FillPolygon(a.fill, pts)
	}
}

// clock are round times of day.
type clock struct{ zero time.Time }

var clockSteps = []time.Duration{time.Second, 2 * time.Second, 5 * time.Second, 10 * time.Second, 20 * time.Second, 30 * time.Second,
	time.Minute, 2 * time.Minute, 5 * time.Minute, 10 * time.Minute, 20 * time.Minute, 30 * time.Minute,
	time.Hour, 2 * time.Hour, 3 * time.Hour, 6 * time.Hour, 12 * time.Hour, 24 * time.Hour}

// Ticks implements plot.Ticker.
func (k clock) Ticks(lo, hi float64) []plot.Tick {
	step := clockSteps[len(clockSteps)-1]
	for _, s := range clockSteps {
		if (hi-lo)/s.Seconds() <= 10 {
			step = s
			break
		}
	}
	for (hi-lo)/step.Seconds() > 10 {
		step *= 2
	}
	form := "15:04"
	switch {
	case step < time.Minute:
		form = "15:04:05"
	case step >= 24*time.Hour:
		form = "01-02"
	}
	var out []plot.Tick
	from := k.zero.Add(time.Duration(lo * 1e9)).UTC()
	for t := from.Truncate(step); ; t = t.Add(step) {
		v := t.Sub(k.zero).Seconds()
		if v > hi+1e-9 || math.IsNaN(v) {
			return out
		}
		if v >= lo-1e-9 {
			out = append(out, plot.Tick{Value: v, Label: t.Format(form)})
		}
	}
}
