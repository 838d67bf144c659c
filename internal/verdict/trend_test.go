package verdict

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Slopes that are known: a line with noise, with wild blocks, and none.
func TestTrendFindsTheSlope(t *testing.T) {
	for name, c := range map[string]struct {
		perHour, noise float64
		blocks         int
		way            Way
	}{
		"rises 2 mm² an hour":     {2, 0.3, 300, Rising},
		"falls 2 mm² an hour":     {-2, 0.3, 300, Falling},
		"stays":                   {0, 0.3, 300, Steady},
		"too short to tell":       {2, 0.3, trendLeast - 1, Unknown},
		"slower than its noise":   {0.02, 1, 40, Steady},
		"grows over a fortnight":  {0.02, 0.3, 40000, Rising},
		"clear, but a trifle":     {0.01, 0.001, 300, Steady},
		"steady after it has got": {0, 0.1, 2000, Steady},
	} {
		t.Run(name, func(t *testing.T) {
			r := rand.New(rand.NewPCG(3, uint64(len(name))))
			var k course
			for i := range c.blocks {
				at := 30 * float64(i)
				v := 10 + c.perHour*at/3600 + c.noise*r.NormFloat64()
				if i%17 == 5 {
					v += 5 * c.noise * r.NormFloat64()
				}
				if name == "steady after it has got" && i < 200 {
					v -= 8
				}
				k = k.add(at, v)
				if len(k) >= coursePoints {
					t.Fatalf("%d points", len(k))
				}
			}
			tr := k.trend("leak_area_mm2", 0.5)
			t.Logf("%+v; %s", tr, tr.words())
			if tr.Way != c.way {
				t.Errorf("%s", tr.Way)
			}
			if tr.Way == Rising || tr.Way == Falling {
				if math.Abs(tr.PerHour-c.perHour) > 0.15*math.Abs(c.perHour) || tr.Lo > c.perHour || tr.Hi < c.perHour {
					t.Errorf("%g an hour (%g to %g)", tr.PerHour, tr.Lo, tr.Hi)
				}
			}
		})
	}
	k := course{}.add(100, 1).add(110, 2).add(5, 3)
	if len(k) != 1 || k[0].v != 3 {
		t.Errorf("a clock that went back: %v", k)
	}
	if k = k.add(math.NaN(), 1).add(20, math.NaN()); len(k) != 1 {
		t.Errorf("absent numbers were taken: %v", k)
	}
}
