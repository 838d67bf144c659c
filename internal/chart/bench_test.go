package chart_test

import (
	"bytes"
	"testing"

	"lapwing/internal/chart"
)

// What one picture for the page costs.
func BenchmarkAngleSVG(b *testing.B) {
	c := cylinder()
	n := 0
	for b.Loop() {
		d, err := chart.Angle(chart.Picture{Turns: []chart.Cylinder{c}}, chart.Options{})
		if err != nil {
			b.Fatal(err)
		}
		var buf bytes.Buffer
		if err := d.Write(&buf, chart.SVG); err != nil {
			b.Fatal(err)
		}
		n = buf.Len()
	}
	b.ReportMetric(float64(n), "bytes/chart")
}
