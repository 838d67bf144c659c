package chart_test

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"strings"
	"testing"
	"time"

	"lapwing/internal/chart"
)

// cylinder is an ideal cycle: two isentropes and two plateaus at both ends.
func cylinder() chart.Cylinder {
	c := chart.Cylinder{Name: "t1", About: "a turn", Lo: -60, Step: 1, Load: &chart.Load{RatedPush: 40e3, RatedPull: 30e3, ReversalDeg: 150, ReversalShare: .8}}
	n := 481
	for e := range c.Ends {
		end := &chart.End{LinePs: 8e5, LinePd: 20e5}
		for i := range n {
			a := (c.Lo + float64(i)*c.Step + 180*float64(e)) * math.Pi / 180
			v := 1e-3 + 5e-3*(1-math.Cos(a))/2
			p := 8e5 * math.Pow(6e-3/v, 1.3)
			if math.Sin(a) > 0 {
				p = 20e5 * math.Pow(1e-3/v, 1.3)
			}
			end.P, end.V = append(end.P, min(max(p, 8e5), 20e5)), append(end.V, v)
		}
		end.Strokes[0] = chart.Stroke{From: 260, To: 300, N: 1.3}
		end.Events = []chart.Event{{Suction: true, Opens: true, Angle: 52, Expected: 50, Lo: 50, Hi: 61, Sure: true}, {Angle: math.NaN(), Expected: math.NaN(), Lo: -5, Hi: 15, Shared: true}}
		c.Ends[e] = end
	}
	vib := chart.Vib{Channel: "a1"}
	for i := range n {
		vib.Peak = append(vib.Peak, math.Abs(30*math.Sin(float64(i)/20)))
		c.Load.Gas = append(c.Load.Gas, 20e3*math.Sin(float64(i)*math.Pi/180))
		c.Load.Pin = append(c.Load.Pin, 18e3*math.Sin(float64(i)*math.Pi/180))
	}
	c.Vib = []chart.Vib{vib}
	return c
}

type drawer struct {
	name string
	draw func(chart.Options) (*chart.Drawing, error)
	says []string
}

func all() []drawer {
	c, other := cylinder(), cylinder()
	p := chart.Picture{Turns: []chart.Cylinder{c, other}, Reference: &other}
	t0 := time.Date(2031, 5, 4, 3, 2, 1, 0, time.UTC)
	tr := chart.Trend{Title: "t1.he/n_comp_late", Unit: "n_comp_late"}
	for i := range 50 {
		v := chart.TrendPoint{At: t0.Add(time.Duration(i) * time.Second), Value: 1.3 + .001*float64(i%7), Expected: 1.3, Spread: .004}
		if i == 20 {
			v.Value, v.Expected = math.NaN(), math.NaN()
		}
		tr.Points = append(tr.Points, v)
	}
	tr.Marks = []chart.TrendMark{{At: t0.Add(30 * time.Second), Text: "alert: t1.he.suction leaking", Severity: 2}}
	sp := chart.Spectrum{Title: "a1", Unit: "g²/Hz"}
	for i := range 400 {
		sp.Hz, sp.Density = append(sp.Hz, float64(i)*50), append(sp.Density, 1e-3/(1+float64(i)))
	}
	return []drawer{
		{"angle", func(o chart.Options) (*chart.Drawing, error) { return chart.Angle(p, o) },
			[]string{"pressure, bar abs", "a1, g peak", "head end", "crank end", "reference", "1 more turns", "s opens", "d closes (shared)", "crank angle after head-end dead centre, degrees"}},
		{"pv", func(o chart.Options) (*chart.Drawing, error) { return chart.PV(p, o) }, []string{"volume, litres", "pressure, bar abs"}},
		{"logpv", func(o chart.Options) (*chart.Drawing, error) { return chart.LogPV(p, o) }, []string{"HE compression n = 1.300", "CE compression n = 1.300"}},
		{"load", func(o chart.Options) (*chart.Drawing, error) { return chart.RodLoad(p, o) },
			[]string{"reversal 150°, lesser peak 80 % of the greater", "rated", "gas alone", "kN, compression positive"}},
		{"trend", tr.Over, []string{"expected at this duty, ±3 spreads", "alert: t1.he.suction leaking", "UTC, from 2031-05-04 03:02:01"}},
		{"spectrum", sp.Draw, []string{"density, g²/Hz", "frequency, kHz"}},
	}
}

// texts gives what stands in an SVG, and fails when it is not well-formed.
func texts(t *testing.T, svg []byte) string {
	t.Helper()
	var b strings.Builder
	d := xml.NewDecoder(bytes.NewReader(svg))
	for {
		tok, err := d.Token()
		if errors.Is(err, io.EOF) {
			return b.String()
		}
		if err != nil {
			t.Fatalf("not well-formed: %v", err)
		}
		if c, ok := tok.(xml.CharData); ok {
			b.Write(c)
			b.WriteByte('\n')
		}
	}
}

// Every chart in every format and theme: readable by the standard library's decoders, saying what it must.
func TestCharts(t *testing.T) {
	for _, c := range all() {
		for _, theme := range []chart.Theme{chart.Paper, chart.Night} {
			d, err := c.draw(chart.Options{Theme: theme})
			if err != nil {
				t.Fatalf("%s: %v", c.name, err)
			}
			var svg, img, pdf bytes.Buffer
			if err := d.Write(&svg, chart.SVG); err != nil {
				t.Fatalf("%s: %v", c.name, err)
			}
			said := texts(t, svg.Bytes())
			for _, w := range c.says {
				if !strings.Contains(said, w) {
					t.Errorf("%s does not say %q", c.name, w)
				}
			}
			if strings.Contains(said, "NaN") || strings.Contains(svg.String(), "NaN") {
				t.Errorf("%s: NaN in the drawing", c.name)
			}
			if theme != chart.Paper {
				continue
			}
			small, err := c.draw(chart.Options{WidthMM: 90, HeightMM: 60})
			if err != nil {
				t.Fatalf("%s: %v", c.name, err)
			}
			if err := errors.Join(small.Write(&img, chart.PNG), small.Write(&pdf, chart.PDF)); err != nil {
				t.Fatalf("%s: %v", c.name, err)
			}
			p, err := png.Decode(&img)
			if err != nil || p.Bounds().Dx() < 300 {
				t.Errorf("%s: png: %v", c.name, err)
			}
			if !bytes.HasPrefix(pdf.Bytes(), []byte("%PDF-")) {
				t.Errorf("%s: no PDF", c.name)
			}
		}
	}
}

// What a script reads off Areas is where the curve is: the highest pressure lies where the picture has its blue.
func TestAreas(t *testing.T) {
	c := cylinder()
	c.Ends[1], c.Vib = nil, nil
	d, err := chart.Angle(chart.Picture{Turns: []chart.Cylinder{c}}, chart.Options{})
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := d.Write(&b, chart.PNG); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	a := d.Areas[0]
	w, h := float64(img.Bounds().Dx()), float64(img.Bounds().Dy())
	for _, deg := range []float64{20, 90, 230, 340} {
		i := int(deg - c.Lo)
		x := a.Box[0] + (deg-a.X[0])/(a.X[1]-a.X[0])*(a.Box[2]-a.Box[0])
		y := a.Box[3] - (c.Ends[0].P[i]*1e-5-a.Y[0])/(a.Y[1]-a.Y[0])*(a.Box[3]-a.Box[1])
		blue := false
		for dy := -3; dy <= 3 && !blue; dy++ {
			r, _, bl, _ := img.At(int(x*w), int(y*h)+dy).RGBA()
			blue = bl > 2*r && bl > 0x6000
		}
		if !blue {
			t.Errorf("no curve at %g degrees where Areas says it is", deg)
		}
	}
}

// What cannot be drawn is said, and never panics.
func TestRefused(t *testing.T) {
	good := cylinder()
	pic := func(f func(*chart.Cylinder)) chart.Picture {
		c := cylinder()
		f(&c)
		return chart.Picture{Turns: []chart.Cylinder{c}}
	}
	for _, c := range []struct {
		name string
		p    chart.Picture
		o    chart.Options
		want string
	}{
		{"nothing", chart.Picture{}, chart.Options{}, "no turn"},
		{"uneven", pic(func(c *chart.Cylinder) { c.Ends[0].V = c.Ends[0].V[:7] }), chart.Options{}, "points"},
		{"no grid", pic(func(c *chart.Cylinder) { c.Step = 0 }), chart.Options{}, "no angle grid"},
		{"stroke outside", pic(func(c *chart.Cylinder) { c.Ends[0].Strokes[1].To = 9999 }), chart.Options{}, "stroke"},
		{"all unknown", pic(func(c *chart.Cylinder) {
			for _, e := range c.Ends {
				for i := range e.P {
					e.P[i] = math.NaN()
				}
			}
		}), chart.Options{}, "no pressure"},
		{"no range", chart.Picture{Turns: []chart.Cylinder{good}}, chart.Options{From: 20, To: 21}, "no range"},
		{"too small", chart.Picture{Turns: []chart.Cylinder{good}}, chart.Options{WidthMM: 10}, "between"},
		{"too large", chart.Picture{Turns: []chart.Cylinder{good}}, chart.Options{HeightMM: 1e6}, "between"},
		{"no theme", chart.Picture{Turns: []chart.Cylinder{good}}, chart.Options{Theme: 9}, "theme"},
	} {
		if _, err := chart.Angle(c.p, c.o); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.name, err, c.want)
		}
	}
	if _, err := chart.LogPV(pic(func(c *chart.Cylinder) { c.Ends[0].P[100] = -1 }), chart.Options{}); err != nil {
		t.Errorf("a pressure below zero is a gap on a logarithmic axis: %v", err)
	}
	if _, err := chart.RodLoad(pic(func(c *chart.Cylinder) { c.Load = nil }), chart.Options{}); err == nil {
		t.Error("a load that is not known was drawn")
	}
	if _, err := (chart.Trend{}).Over(chart.Options{}); err == nil {
		t.Error("an empty trend was drawn")
	}
	if d, err := chart.PV(chart.Picture{Turns: []chart.Cylinder{good}}, chart.Options{}); err != nil || d.Write(io.Discard, "gif") == nil {
		t.Errorf("a format that is not there was written (%v)", err)
	}
}

// A trend of one point and one over years have sound axes.
func TestTrendSpans(t *testing.T) {
	t0 := time.Date(2030, 1, 1, 0, 0, 0, 0, time.UTC)
	for _, span := range []time.Duration{0, time.Millisecond, time.Minute, 26 * time.Hour, 5 * 365 * 24 * time.Hour} {
		tr := chart.Trend{Title: "x", Unit: "bar", Points: []chart.TrendPoint{{At: t0, Value: 1}, {At: t0.Add(span), Value: 1}}}
		d, err := tr.Over(chart.Options{})
		if err != nil {
			t.Fatalf("%v: %v", span, err)
		}
		if err := d.Write(io.Discard, chart.SVG); err != nil {
			t.Errorf("%v: %v", span, err)
		}
	}
}

// Two turns out of a thousand that a load step has spoilt do not flatten the rest: they run off the axis, and are counted.
func TestALoneValueDoesNotFlattenATrend(t *testing.T) {
	t0 := time.Date(2031, 5, 4, 3, 2, 1, 0, time.UTC)
	tr := chart.Trend{Title: "t1.he.suction/leak_area_mm2", Unit: "leak area, mm²"}
	for i := range 1000 {
		v := chart.TrendPoint{At: t0.Add(time.Duration(i) * time.Second), Value: 2 + float64(i%3), Expected: math.NaN(), Spread: math.NaN()}
		if i == 300 || i == 600 {
			v.Value = 500
		}
		tr.Points = append(tr.Points, v)
	}
	d, err := tr.Over(chart.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if y := d.Areas[0].Y; y[1] > 10 || y[0] > 2 || y[1] < 4 {
		t.Errorf("axis from %g to %g", y[0], y[1])
	}
	var svg bytes.Buffer
	if err := d.Write(&svg, chart.SVG); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(svg.String(), "2 of 1000 values lie beyond the axis") {
		t.Error("the chart does not say what it leaves out")
	}
}
