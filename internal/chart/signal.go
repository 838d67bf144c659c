package chart

import (
	"errors"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Signal is a stretch of one channel over time, as sampled.
type Signal struct {
	Title, About, Unit string
	Rate               float64 // samples a second
	V                  []float64
	Full               [2]float64 // what the converter can show; drawn when the signal comes near it
}

// signalColumns is how many columns a long signal is drawn in: each shows its least and its largest sample, so that no
// peak is lost.
const signalColumns = 1200

// Draw draws the signal over time in milliseconds.
func (s Signal) Draw(o Options) (*Drawing, error) {
	if !(s.Rate > 0) || len(s.V) < 2 {
		return nil, errors.New("chart: no signal to draw")
	}
	d, err := newDrawing(o, s.Title, s.About, 200, 80)
	if err != nil {
		return nil, err
	}
	y := noSpan()
	y.all(s.V, 1)
	if y.empty() {
		return nil, errors.New("chart: the signal has no value")
	}
	pl := d.p.blank()
	pl.X.Label.Text, pl.Y.Label.Text = "time, ms", s.Unit
	pl.X.Min, pl.X.Max = 0, float64(len(s.V)-1)/s.Rate*1e3
	pl.X.Tick.Marker, pl.Y.Tick.Marker = few(10), few(6)
	if y.lo == y.hi { // a dead channel is a line in the middle
		half := math.Max(math.Abs(y.lo)*.01, 1e-3)
		y.lo, y.hi = y.lo-half, y.hi+half
	}
	pl.Y.Min, pl.Y.Max = y.wide(.05, .05)
	d.p.thinGrid(pl, true, true)
	var full []float64
	for _, f := range s.Full {
		if f > pl.Y.Min && f < pl.Y.Max {
			full = append(full, f)
		}
	}
	pl.Add(rules{y: full, style: draw.LineStyle{Color: d.p.severity[3], Width: vg.Points(.9), Dashes: []vg.Length{vg.Points(7), vg.Points(3)}}})
	pl.Add(s.columns(draw.LineStyle{Color: d.p.ink, Width: vg.Points(.7)}))
	d.rows = []row{{name: "signal", plot: pl, share: 1}}
	d.lay(draw.New(nowhere(d)), false)
	return d, nil
}

// columns is the signal itself, or the least and largest of each column in the order in which they came.
func (s Signal) columns(style draw.LineStyle) plot.Plotter {
	ms := func(i int) float64 { return float64(i) / s.Rate * 1e3 }
	n := len(s.V)
	if n <= 2*signalColumns {
		return curve{x: ms, y: func(i int) float64 { return s.V[i] }, n: n, style: style}
	}
	at := make([]int, 0, 2*signalColumns)
	for c := range signalColumns {
		from, to := c*n/signalColumns, (c+1)*n/signalColumns
		lo, hi := from, from
		for i := from + 1; i < to; i++ {
			if s.V[i] < s.V[lo] {
				lo = i
			}
			if s.V[i] > s.V[hi] {
				hi = i
			}
		}
		at = append(at, min(lo, hi), max(lo, hi))
	}
	return curve{x: func(k int) float64 { return ms(at[k]) }, y: func(k int) float64 { return s.V[at[k]] }, n: len(at), style: style}
}
