package sensor

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestSlip(t *testing.T) {
	for _, c := range []struct {
		name    string
		throws  int
		phase   func(turn, throw int) float64
		want    float64
		doubted bool
	}{
		{"healthy", 3, func(int, int) float64 { return 0 }, 0, false},
		{"all late", 3, func(turn, _ int) float64 { return .5 * b2f(turn > 200) }, .5, true},
		{"all early", 2, func(int, int) float64 { return -1.5 }, -1.5, true},
		{"a little", 2, func(int, int) float64 { return .2 }, .2, false},
		{"one throw of three", 3, func(_, throw int) float64 { return b2f(throw == 1) }, .5, false},
		{"the only throw", 1, func(int, int) float64 { return .6 }, .6, true},
		{"late, and put right", 2, func(turn, _ int) float64 { return .8 * b2f(turn < 400) }, 0, false},
		{"one throw does not tell", 2, func(_, throw int) float64 {
			if throw == 0 {
				return math.NaN()
			}
			return .7
		}, .7, true},
	} {
		r := rand.New(rand.NewPCG(1, 2))
		s := NewSlip(c.throws)
		for turn := range 800 {
			for i := range c.throws {
				s.Add(i, int64(turn), c.phase(turn, i)+.1*r.NormFloat64())
			}
		}
		if deg, doubt := s.Late(); math.Abs(deg-c.want) > .08 || doubt != c.doubted {
			t.Errorf("%s: %.2f°, doubted %v; want %.2f°, %v", c.name, deg, doubt, c.want, c.doubted)
		}
		if s.Anew(); s.Throws(800) != 0 {
			t.Errorf("%s: throws tell after it began anew", c.name)
		}
	}
}

func b2f(b bool) float64 {
	if b {
		return 1
	}
	return 0
}
