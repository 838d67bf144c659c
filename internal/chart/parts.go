package chart

import (
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// curve is a line that breaks where a value is not known.
type curve struct {
	x, y  func(i int) float64
	n     int
	style draw.LineStyle
}

// Plot implements plot.Plotter.
func (l curve) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	var run []vg.Point
	flush := func() {
		if len(run) > 1 {
			c.StrokeLines(l.style, c.ClipLinesXY(run)...)
		}
		run = run[:0:0]
	}
	for i := range l.n {
		x, y := l.x(i), l.y(i)
		if !finite(x) || !finite(y) {
			flush()
			continue
		}
		run = append(run, vg.Point{X: fx(x), Y: fy(y)})
	}
	flush()
}

// Thumbnail implements plot.Thumbnailer.
func (l curve) Thumbnail(c *draw.Canvas) {
	c.StrokeLine2(l.style, c.Min.X, c.Center().Y, c.Max.X, c.Center().Y)
}

// overAngle is a curve of values on a grid.
func overAngle(lo, step float64, v []float64, scale float64, style draw.LineStyle) curve {
	return curve{x: func(i int) float64 { return lo + float64(i)*step }, y: func(i int) float64 { return v[i] * scale }, n: len(v), style: style}
}

// rules are straight lines across the panel.
type rules struct {
	x, y  []float64
	style draw.LineStyle
}

// Plot implements plot.Plotter.
func (r rules) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	for _, x := range r.x {
		if at := fx(x); c.ContainsX(at) {
			c.StrokeLine2(r.style, at, c.Min.Y, at, c.Max.Y)
		}
	}
	for _, y := range r.y {
		if at := fy(y); finite(y) && c.ContainsY(at) {
			c.StrokeLine2(r.style, c.Min.X, at, c.Max.X, at)
		}
	}
}

// Thumbnail implements plot.Thumbnailer.
func (r rules) Thumbnail(c *draw.Canvas) {
	c.StrokeLine2(r.style, c.Min.X, c.Center().Y, c.Max.X, c.Center().Y)
}

// box is a filled rectangle in data units; NaN heights take the whole panel.
type box struct {
	x0, x1, y0, y1 float64
	fill           color.Color
	edge           draw.LineStyle
}

// Plot implements plot.Plotter.
func (b box) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	x0, x1, y0, y1 := max(fx(b.x0), c.Min.X), min(fx(b.x1), c.Max.X), c.Min.Y, c.Max.Y
	if finite(b.y0) && finite(b.y1) {
		y0, y1 = max(fy(b.y0), c.Min.Y), min(fy(b.y1), c.Max.Y)
	}
	if !(x1 > x0 && y1 > y0) {
		return
	}
	pts := []vg.Point{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}}
	if b.fill != nil {
		c.FillPolygon(b.fill, pts)
	}
	if b.edge.Width > 0 {
		c.StrokeLines(b.edge, append(pts, pts[0]))
	}
}

// Thumbnail implements plot.Thumbnailer.
func (b box) Thumbnail(c *draw.Canvas) {
	c.FillPolygon(b.fill, []vg.Point{c.Min, {X: c.Max.X, Y: c.Min.Y}, c.Max, {X: c.Min.X, Y: c.Max.Y}})
}

// label is a text at a place in data units.
type label struct {
	x, y  float64
	text  string
	style text.Style
	dx    vg.Length
	dy    vg.Length

	ground color.Color // under the words; nil: none
}

// Plot implements plot.Plotter.
func (l label) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	at := vg.Point{X: fx(l.x) + l.dx, Y: fy(l.y) + l.dy}
	if !c.ContainsX(at.X) {
		return
	}
	w := l.style.Width(l.text) // pushed in when it would stick out
	switch l.style.XAlign {
	case draw.XCenter:
		at.X = min(max(at.X, c.Min.X+w/2), c.Max.X-w/2)
	case draw.XLeft:
		at.X = min(at.X, c.Max.X-w)
	case draw.XRight:
		at.X = max(at.X, c.Min.X+w+2)
	}
	if l.ground != nil {
		box := l.style.Rectangle(l.text).Add(at)
		c.FillPolygon(l.ground, []vg.Point{box.Min, {X: box.Max.X, Y: box.Min.Y}, box.Max, {X: box.Min.X, Y: box.Max.Y}})
	}
	c.FillText(l.style, at, l.text)
}

// backing lies under the legend, so that no line runs through its words. It is the last thing added to a panel.
type backing struct{ ground color.Color }

// Plot implements plot.Plotter.
func (b backing) Plot(c draw.Canvas, p *plot.Plot) {
	r := p.Legend.Rectangle(c)
	if r.Size().X <= 0 || r.Size().Y <= 0 {
		return
	}
	const edge = 2
	x0, x1 := c.Min.X, c.Min.X+r.Size().X+edge // the library's rectangle lies on the other side than its legend
	if !p.Legend.Left {
		x0, x1 = c.Max.X-r.Size().X-edge, c.Max.X
	}
	y0, y1 := r.Min.Y-2*edge, c.Max.Y
	c.FillPolygon(b.ground, []vg.Point{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}})
}

// pointer is a small hollow triangle that points up at a place from below.
type pointer struct {
	x, y  float64
	style draw.LineStyle
}

// Plot implements plot.Plotter.
func (m pointer) Plot(c draw.Canvas, p *plot.Plot) {
	fx, fy := p.Transforms(&c)
	x, y := fx(m.x), fy(m.y)
	if !c.ContainsX(x) {
		return
	}
	const half, high = 2.2, 3.6
	c.StrokeLines(m.style, []vg.Point{{X: x, Y: y}, {X: x - half, Y: y - high}, {X: x + half, Y: y - high}, {X: x, Y: y}})
}

func (p *palette) words(size float64, c color.Color, x text.XAlignment, y text.YAlignment) text.Style {
	s := plot.New().Title.TextStyle
	s.Font, s.Color, s.XAlign, s.YAlign = typeface(size), c, x, y
	return s
}

var nan = math.NaN()

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// span grows a range by values.
type span struct{ lo, hi float64 }

func noSpan() span { return span{math.Inf(1), math.Inf(-1)} }

func (s *span) take(v float64) {
	if finite(v) {
		s.lo, s.hi = min(s.lo, v), max(s.hi, v)
	}
}

func (s *span) all(v []float64, scale float64) {
	for _, x := range v {
		s.take(x * scale)
	}
}

func (s span) empty() bool { return s.hi < s.lo }

// wide leaves a share of room on both sides.
func (s span) wide(below, above float64) (lo, hi float64) {
	d := s.hi - s.lo
	if d == 0 {
		d = max(math.Abs(s.hi), 1)
	}
	return s.lo - below*d, s.hi + above*d
}

// few are at most about n ticks of a plain axis at round steps.
type few int

// Ticks implements plot.Ticker.
func (n few) Ticks(lo, hi float64) []plot.Tick {
	step := roundStep((hi - lo) / float64(n))
	if !(step > 0) || !finite(step) {
		return nil
	}
	digits := int(max(0, -math.Floor(math.Log10(step)+1e-9)))
	var out []plot.Tick
	for v := math.Ceil(lo/step-1e-9) * step; v <= hi+step*1e-9; v += step {
		if math.Abs(v) < step*1e-9 {
			v = 0
		}
		out = append(out, plot.Tick{Value: v, Label: number(v, digits)})
	}
	return out
}

func values(t []plot.Tick) (v []float64) {
	for _, x := range t {
		v = append(v, x.Value)
	}
	return v
}

// roundStep is the next 1, 2 or 5 times a power of ten.
func roundStep(x float64) float64 {
	if !(x > 0) {
		return math.NaN()
	}
	e := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{1, 2, 5} {
		if x <= m*e*(1+1e-9) {
			return m * e
		}
	}
	return 10 * e
}

// thinGrid draws the lines of a panel's ticks behind everything.
func (p *palette) thinGrid(pl *plot.Plot, xs, ys bool) {
	g := rules{style: draw.LineStyle{Color: p.grid, Width: vg.Points(.5)}}
	if xs {
		g.x = values(pl.X.Tick.Marker.Ticks(pl.X.Min, pl.X.Max))
	}
	if ys {
		g.y = values(pl.Y.Tick.Marker.Ticks(pl.Y.Min, pl.Y.Max))
	}
	pl.Add(g)
}
