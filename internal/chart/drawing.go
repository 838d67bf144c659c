package chart

import (
	"bytes"
	"fmt"
	"io"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/recorder"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Format is a file format.
type Format string

// The formats.
const (
	SVG Format = "svg"
	PNG Format = "png"
	PDF Format = "pdf"
)

// Options of a chart. Zero sizes take what suits the chart.
type Options struct {
	WidthMM, HeightMM float64
	Theme             Theme
	From, To          float64 // degrees shown of an angle axis; both 0: from −30 to 390
}

const (
	dotsPerInch = 144
	leastMM     = 60
	mostMM      = 1200
)

// Drawing is a chart that can be written in any format.
type Drawing struct {
	w, h  vg.Length
	p     *palette
	title string
	about string
	rows  []row
	Areas []Area
}

// row is one panel of a drawing and its share of the height.
type row struct {
	name  string
	plot  *plot.Plot
	share float64
	log   bool
}

func newDrawing(o Options, title, about string, wMM, hMM float64) (*Drawing, error) {
	if o.WidthMM > 0 {
		wMM = o.WidthMM
	}
	if o.HeightMM > 0 {
		hMM = o.HeightMM
	}
	if wMM < leastMM || hMM < leastMM || wMM > mostMM || hMM > mostMM {
		return nil, fmt.Errorf("chart: %g by %g mm: both sides lie between %d and %d mm", wMM, hMM, leastMM, mostMM)
	}
	if int(o.Theme) >= len(palettes) {
		return nil, fmt.Errorf("chart: no theme %d", o.Theme)
	}
	return &Drawing{w: vg.Length(wMM) * vg.Millimeter, h: vg.Length(hMM) * vg.Millimeter, p: &palettes[o.Theme], title: title, about: about}, nil
}

// lay puts the panels under each other, with one left and one right edge, and says where they lie.
func (d *Drawing) lay(c draw.Canvas, paint bool) {
	const margin = 8
	c.SetColor(d.p.ground)
	c.Fill(c.Rectangle.Path())
	top := c.Max.Y - vg.Points(margin)
	title := plot.New().Title.TextStyle
	title.Font, title.Color, title.XAlign, title.YAlign = typeface(11), d.p.ink, draw.XLeft, draw.YTop
	left := c.Min.X + vg.Points(margin)
	c.FillText(title, vg.Point{X: left, Y: top}, d.title)
	top -= vg.Points(15)
	title.Font, title.Color = typeface(8), d.p.faint
	for line := range strings.Lines(d.about) {
		c.FillText(title, vg.Point{X: left, Y: top}, strings.TrimSpace(line))
		top -= vg.Points(11)
	}
	top -= vg.Points(2)
	inner := draw.Crop(c, vg.Points(margin), -vg.Points(margin+4), vg.Points(margin), top-c.Max.Y)
	total := 0.0
	for _, r := range d.rows {
		total += r.share
	}
	cells := make([]draw.Canvas, len(d.rows))
	var l, right vg.Length
	y := inner.Max.Y
	for i, r := range d.rows {
		h := inner.Size().Y * vg.Length(r.share/total)
		cells[i] = draw.Canvas{Canvas: inner.Canvas, Rectangle: vg.Rectangle{Min: vg.Point{X: inner.Min.X, Y: y - h}, Max: vg.Point{X: inner.Max.X, Y: y}}}
		y -= h
		data := r.plot.DataCanvas(cells[i])
		l, right = max(l, data.Min.X-cells[i].Min.X), max(right, cells[i].Max.X-data.Max.X)
	}
	d.Areas = d.Areas[:0]
	for i, r := range d.rows {
		data := r.plot.DataCanvas(cells[i])
		cell := draw.Crop(cells[i], l-(data.Min.X-cells[i].Min.X), -(right - (cells[i].Max.X - data.Max.X)), 0, 0)
		data = r.plot.DataCanvas(cell)
		fx := func(x vg.Length) float64 { return float64((x - c.Min.X) / c.Size().X) }
		fy := func(y vg.Length) float64 { return float64((c.Max.Y - y) / c.Size().Y) }
		d.Areas = append(d.Areas, Area{Name: r.name, Log: r.log, Box: [4]float64{fx(data.Min.X), fy(data.Max.Y), fx(data.Max.X), fy(data.Min.Y)},
			X: [2]float64{r.plot.X.Min, r.plot.X.Max}, Y: [2]float64{r.plot.Y.Min, r.plot.Y.Max}})
		if paint {
			r.plot.Draw(cell)
		}
	}
}

// nowhere is a canvas to measure on.
func nowhere(d *Drawing) vg.CanvasSizer { return &size{w: d.w, h: d.h} }

type size struct {
	recorder.Canvas
	w, h vg.Length
}

// Size implements vg.CanvasSizer.
func (s *size) Size() (x, y vg.Length) { return s.w, s.h }

// Write draws the chart in a format.
func (d *Drawing) Write(w io.Writer, f Format) error {
	var c interface {
		vg.CanvasSizer
		io.WriterTo
	}
	switch f {
	case SVG:
		c = vgsvg.New(d.w, d.h)
	case PNG:
		c = vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(d.w, d.h), vgimg.UseDPI(dotsPerInch))}
	case PDF:
		p := vgpdf.New(d.w, d.h)
		p.EmbedFonts(true)
		c = p
	default:
		return fmt.Errorf("chart: no format %q: svg, png or pdf", f)
	}
	d.lay(draw.New(c), true)
	if f != SVG {
		if _, err := c.WriteTo(w); err != nil {
			return fmt.Errorf("chart: write: %w", err)
		}
		return nil
	}
	var b bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return fmt.Errorf("chart: write: %w", err)
	}
	// A viewer without the typeface takes its own sans, not its serif.
	out := bytes.ReplaceAll(b.Bytes(), []byte("font-family:Liberation Sans;"), []byte("font-family:Liberation Sans,Arimo,Arial,sans-serif;"))
	if _, err := w.Write(out); err != nil {
		return fmt.Errorf("chart: write: %w", err)
	}
	return nil
}
