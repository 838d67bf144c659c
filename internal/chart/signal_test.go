package chart

import (
	"bytes"
	"math"
	"testing"

	"gonum.org/v1/plot/vg/draw"
	"pgregory.net/rapid"
)

func TestSignalDraws(t *testing.T) {
	v := make([]float64, 20000)
	for i := range v {
		v[i] = math.Sin(2 * math.Pi * 50 * float64(i) / 20000)
	}
	d, err := Signal{Title: "a1", Unit: "g", Rate: 20000, V: v, Full: [2]float64{-1.02, 40}}.Draw(Options{})
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := d.Write(&b, SVG); err != nil || b.Len() > 200_000 {
		t.Errorf("%v, %d bytes", err, b.Len())
	}
	a := d.Areas[0]
	if a.Name != "signal" || math.Abs(a.X[1]-999.95) > 1e-9 || a.Y[0] > -1 || a.Y[1] < 1 {
		t.Errorf("the panel is %+v", a)
	}
	for name, s := range map[string]Signal{"nothing": {Rate: 1}, "no rate": {V: v}, "no value": {Rate: 1, V: []float64{nan, nan}}} {
		if _, err := s.Draw(Options{}); err == nil {
			t.Errorf("%s is drawn", name)
		}
	}
	if _, err := (Signal{Rate: 1, V: []float64{3, 3, 3}}).Draw(Options{}); err != nil {
		t.Errorf("a dead channel: %v", err)
	}
}

// However long a signal is, its least and largest samples are on the drawing, and in time order.
func TestSignalKeepsItsPeaks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := make([]float64, rapid.IntRange(2, 9000).Draw(t, "n"))
		lo, hi := rapid.IntRange(0, len(v)-1).Draw(t, "lo"), rapid.IntRange(0, len(v)-1).Draw(t, "hi")
		v[lo], v[hi] = -7, 9
		c := Signal{Rate: 100, V: v}.columns(draw.LineStyle{}).(curve)
		least, most, last := 0.0, 0.0, -1.0
		for i := range c.n {
			least, most = min(least, c.y(i)), max(most, c.y(i))
			if c.x(i) < last {
				t.Fatalf("point %d goes back", i)
			}
			last = c.x(i)
		}
		if most != 9 || lo != hi && least != -7 {
			t.Fatalf("%g to %g", least, most)
		}
	})
}
