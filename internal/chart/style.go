package chart

import (
	"image/color"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Theme is the ground a chart is drawn on.
type Theme uint8

// The themes. Paper is for print and light pages.
const (
	Paper Theme = iota
	Night
)

// palette is what a theme draws with.
type palette struct {
	ground, ink, faint, grid color.Color
	end                      [2]color.NRGBA // head end, crank end
	reference                color.Color
	severity                 [4]color.NRGBA // by severity, 0 unused
}

// Okabe and Ito: blue 0072B2, vermilion D55E00, sky 56B4E9, orange E69F00, bluish green 009E73, yellow F0E442,
// reddish purple CC79A7.
var palettes = [...]palette{
	Paper: {ground: hex(0xffffff), ink: hex(0x1d2226), faint: hex(0x5d666d), grid: hex(0xe2e5e8),
		end: [2]color.NRGBA{hex(0x0072b2), hex(0xd55e00)}, reference: hex(0x8a9299),
		severity: [4]color.NRGBA{1: hex(0xb8a800), 2: hex(0xd55e00), 3: hex(0xaa2c6d)}},
	Night: {ground: hex(0x14181b), ink: hex(0xe4e8ea), faint: hex(0x98a2a9), grid: hex(0x2b3237),
		end: [2]color.NRGBA{hex(0x56b4e9), hex(0xe69f00)}, reference: hex(0x7d878e),
		severity: [4]color.NRGBA{1: hex(0xf0e442), 2: hex(0xe69f00), 3: hex(0xcc79a7)}},
}

func hex(rgb uint32) color.NRGBA {
	return color.NRGBA{uint8(rgb >> 16), uint8(rgb >> 8), uint8(rgb), 255}
}

// thin gives a colour so much of its strength, 0..1.
func thin(c color.NRGBA, share float64) color.NRGBA {
	c.A = uint8(255 * share)
	return c
}

var endDashes = [2][]vg.Length{nil, {vg.Points(5), vg.Points(2)}}

var endNames = [2]string{"head end", "crank end"}

// stroke is the line of an end: main, or one of the others laid over it.
func (p *palette) stroke(end int, main bool) draw.LineStyle {
	s := draw.LineStyle{Color: p.end[end], Width: vg.Points(1.3), Dashes: endDashes[end]}
	if !main {
		s.Color, s.Width = thin(p.end[end], .4), vg.Points(.6)
	}
	return s
}

func (p *palette) referenceStroke() draw.LineStyle {
	return draw.LineStyle{Color: p.reference, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(1.5), vg.Points(1.5)}}
}

func typeface(size float64) font.Font {
	return font.From(font.Font{Typeface: "Liberation", Variant: "Sans"}, vg.Points(size))
}

// blank gives a plot with the look of all panels.
func (p *palette) blank() *plot.Plot {
	pl := plot.New()
	pl.BackgroundColor = nil // the drawing has its own
	style := func(t *text.Style, size float64, c color.Color) { t.Font, t.Color = typeface(size), c }
	for _, a := range []*plot.Axis{&pl.X, &pl.Y} {
		style(&a.Label.TextStyle, 9, p.ink)
		style(&a.Tick.Label, 8, p.ink)
		a.LineStyle = draw.LineStyle{Color: p.faint, Width: vg.Points(.5)}
		a.Tick.LineStyle = a.LineStyle
		a.Tick.Length = vg.Points(3)
		a.Padding = 0
		a.Label.Padding = vg.Points(3)
	}
	style(&pl.Legend.TextStyle, 8, p.ink)
	pl.Legend.Top, pl.Legend.ThumbnailWidth, pl.Legend.Padding = true, vg.Points(22), vg.Points(1.5)
	return pl
}

type colour = color.NRGBA
