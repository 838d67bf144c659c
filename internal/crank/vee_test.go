package crank

import (
	"math"
	"testing"
)

// Throws at any angle to each other need only their own dead centre. The check is plane geometry without crank angles
// measured from a dead centre: the pin on its circle, the crosshead on the axis of its bank, the rod between them.
func TestThrowsOfEveryLayout(t *testing.T) {
	for _, k := range []struct {
		name      string
		bank, pin float64 // degrees: direction of the cylinder's axis; pin of this throw ahead of the first one's
		dead      float64 // dead_centre_deg, with the mark where the first pin points along 0°
	}{
		{"first throw", 0, 0, 0},
		{"V of 90° on one pin", 90, 0, 90},
		{"V of 60° on one pin", 60, 0, 60},
		{"V of 45° to the other side, one pin", -45, 0, 315},
		{"opposed, pins at 180°: both pistons out together", 180, 180, 0},
		{"opposed on one pin: one out, one in", 180, 0, 180},
		{"six throws, pair at 120°", 0, 120, 240},
		{"opposed partner of that pair", 180, 300, 240},
	} {
		r, l := m1.Stroke/2, m1.ConRod
		u, v := math.Cos(k.bank*math.Pi/180), math.Sin(k.bank*math.Pi/180)
		for shaft := 0.0; shaft < 360; shaft += 7 {
			a := (shaft + k.pin) * math.Pi / 180
			x, y := r*math.Cos(a), r*math.Sin(a)
			along, across := x*u+y*v, y*u-x*v
			crosshead := along + math.Sqrt(l*l-across*across)
			near(t, k.name, m1.Travel(math.Mod(shaft-k.dead+360, 360))+1, r+l-crosshead+1, 1e-12)
		}
	}
}
