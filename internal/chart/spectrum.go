package chart

import (
	"errors"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Draw draws a density over frequency, six decades at the most.
func (s Spectrum) Draw(o Options) (*Drawing, error) {
	if len(s.Hz) != len(s.Density) || len(s.Hz) < 2 {
		return nil, errors.New("chart: no spectrum to draw")
	}
	d, err := newDrawing(o, s.Title, s.About, 200, 90)
	if err != nil {
		return nil, err
	}
	y := noSpan()
	for _, v := range s.Density {
		if v > 0 {
			y.take(v)
		}
	}
	if y.empty() {
		return nil, errors.New("chart: the spectrum is zero everywhere")
	}
	pl := d.p.blank()
	pl.X.Label.Text, pl.Y.Label.Text = "frequency, kHz", "density, "+s.Unit
	pl.X.Min, pl.X.Max = 0, s.Hz[len(s.Hz)-1]/1000
	pl.X.Tick.Marker = few(10)
	pl.Y.Scale = plot.LogScale{}
	pl.Y.Max = y.hi * 2
	pl.Y.Min = math.Max(y.lo/2, pl.Y.Max*1e-6)
	pl.Y.Tick.Marker = powers{}
	for _, b := range s.Bands {
		band := box{x0: b[0] / 1000, x1: b[1] / 1000, y0: nan, y1: nan, fill: thin(d.p.end[0], .1)}
		pl.Add(band)
		pl.Legend.Add("in use, "+plain(b[0]/1000)+" to "+plain(b[1]/1000)+" kHz", box{fill: thin(d.p.end[0], .25)})
	}
	d.p.thinGrid(pl, true, true)
	pl.Add(curve{x: func(i int) float64 { return s.Hz[i] / 1000 }, y: func(i int) float64 { return math.Max(s.Density[i], pl.Y.Min) }, n: len(s.Hz),
		style: draw.LineStyle{Color: d.p.ink, Width: vg.Points(.8)}})
	pl.Add(backing{d.p.ground})
	d.rows = []row{{name: "spectrum", plot: pl, share: 1}}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// powers are ticks at whole powers of ten.
type powers struct{}

// Ticks implements plot.Ticker.
func (powers) Ticks(lo, hi float64) (out []plot.Tick) {
	for e := math.Ceil(math.Log10(lo) - 1e-9); e <= math.Log10(hi)+1e-9; e++ {
		out = append(out, plot.Tick{Value: math.Pow(10, e), Label: "1e" + number(e, 0)})
	}
	return out
}
