package sensor

import (
	"math"
	"math/rand/v2"
	"testing"
)

// levelled plays turns of one cylinder whose ends have zeros and sensitivities of their own. Ps 8 bar, Pd 22 bar, 12 turns
// a second, the noise of single turns as measured on the modelled machine.
func levelled(l *Level, seconds float64, zero func(t float64, e int) float64, gain func(t float64, e int) float64, line [2]float64) {
	r := rand.New(rand.NewPCG(5, 6))
	const ps, pd = 8e5, 22e5
	for t := 0.; t < seconds; t += 1. / 12 {
		in := LevelTurn{Time: t, LinePs: ps, LinePd: pd}
		common := 1500 * r.NormFloat64() // of the line transmitter
		for e := range 2 {
			z, g := zero(t, e)-l.Offset(e), gain(t, e)
			in.Zero[e] = z + 1500*r.NormFloat64()
			in.Suction[e] = z + g*ps - line[0] + 100*r.NormFloat64()
			in.Discharge[e] = z + g*pd - line[1] + common + 300*r.NormFloat64()
		}
		l.Add(&in)
	}
}

func none(float64, int) float64 { return 0 }

func TestLevel(t *testing.T) {
	span := [2]float64{40e5, 40e5}
	for _, c := range []struct {
		name       string
		seconds    float64
		zero, gain func(t float64, e int) float64
		line       [2]float64 // by which the lines' transmitters read too high
		off        [2]float64 // Pa that must be taken off, ±1000
		drifted    [2]bool
		doubted    [2]bool
	}{
		{name: "healthy", seconds: 3600, zero: none, gain: none},
		{name: "head end drifts 0.3 bar in two hours", seconds: 7200, gain: none, off: [2]float64{30000, 0}, drifted: [2]bool{true, false},
			zero: func(t float64, e int) float64 { return 30000 * t / 7200 * float64(1-e) }},
		{name: "both ends drift 0.1 bar in an hour, apart", seconds: 3600, gain: none, off: [2]float64{10000, -10000},
			zero: func(t float64, e int) float64 { return 10000 * t / 3600 * float64(1-2*e) }},
		{name: "a zero that jumps by 0.4 bar is not followed at once", seconds: 300, gain: none, off: [2]float64{2000, 0},
			zero: func(t float64, e int) float64 { return 40000 * float64(1-e) }},
		{name: "1 % more at the crank end", seconds: 60, zero: none, doubted: [2]bool{false, true}, gain: func(_ float64, e int) float64 { return .01 * float64(e) }},
		{name: "1 % less at the crank end, and its zero drifts", seconds: 3600, doubted: [2]bool{false, true}, off: [2]float64{0, 12000},
			zero: func(t float64, e int) float64 { return 12000 * t / 3600 * float64(e) }, gain: func(_ float64, e int) float64 { return -.01 * float64(e) }},
		{name: "the lines' transmitters 1 % high", seconds: 600, zero: none, gain: none, line: [2]float64{8e3, 22e3}},
		{name: "the suction line's transmitter 2 % low", seconds: 600, zero: none, gain: none, line: [2]float64{-16e3, 0}},
		{name: "0.4 % is within what taps do", seconds: 60, zero: none, gain: func(_ float64, e int) float64 { return .004 * float64(e) }},
	} {
		l := NewLevel([2]float64{}, span)
		levelled(l, c.seconds, c.zero, c.gain, c.line)
		for e := range 2 {
			g, doubt := l.Gain(e)
			if math.Abs(l.Offset(e)-c.off[e]) > 1000 || l.Drifted(e) != c.drifted[e] || doubt != c.doubted[e] {
				t.Errorf("%s, end %d: %.0f Pa taken off, want %.0f; drifted %v, want %v; sensitivity %+.2f %% doubted %v, want %v", c.name, e, l.Offset(e), c.off[e], l.Drifted(e), c.drifted[e], 100*g, doubt, c.doubted[e])
			}
			if want := c.gain(c.seconds, e); c.doubted[e] && math.Abs(g-want) > .001 {
				t.Errorf("%s, end %d: sensitivity %+.2f %%, want %+.1f %%", c.name, e, 100*g, 100*want)
			}
		}
	}
}

// What is not known is not followed: no process values, no second end, an end that comes and goes.
func TestLevelWithoutKnowledge(t *testing.T) {
	l := NewLevel([2]float64{}, [2]float64{40e5, 40e5})
	nan := math.NaN()
	for i := range 2000 {
		l.Add(&LevelTurn{Time: float64(i), Zero: [2]float64{5e4, 5e4}, Suction: [2]float64{5e4, 5e4}, Discharge: [2]float64{5e4, 5e4}, LinePs: nan, LinePd: nan})
	}
	if l.Offset(0) != 0 || l.Offset(1) != 0 || !l.Coarse(0, 8e5) || l.Coarse(0, 40e5) {
		t.Errorf("%.0f, %.0f Pa, coarse %v", l.Offset(0), l.Offset(1), l.Coarse(0, 8e5))
	}
	for i := range 640 { // one end alone: 1.5 % may be the lines, 3 % is said
		for _, g := range []float64{.015} {
			l.Add(&LevelTurn{Time: float64(i), Zero: [2]float64{0, nan}, Suction: [2]float64{g * 8e5, nan}, Discharge: [2]float64{g * 22e5, nan}, LinePs: 8e5, LinePd: 22e5})
		}
	}
	if g, doubt := l.Gain(0); doubt || math.Abs(g-.015) > 1e-9 {
		t.Errorf("one end alone: %g, doubted %v", g, doubt)
	}
	for i := range 640 {
		l.Add(&LevelTurn{Time: float64(i), Zero: [2]float64{0, nan}, Suction: [2]float64{.03 * 8e5, nan}, Discharge: [2]float64{.03 * 22e5, nan}, LinePs: 8e5, LinePd: 22e5})
	}
	if g, doubt := l.Gain(0); !doubt || math.Abs(g-.03) > 1e-9 {
		t.Errorf("one end alone: %g, doubted %v", g, doubt)
	}
	if l.Anew(); l.Coarse(0, 8e5) {
		t.Error("coarse after it began anew")
	}
}
