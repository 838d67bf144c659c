package frame

import (
	"math"
	"math/rand/v2"
)

// cogs makes the signal of a toothed wheel whose marks are known in closed form. The shaft turns through
// u = u0 + rpm/60·(t + ramp·t²/2) with a ripple: turns = u − amp/(4π)·sin(4πu), a speed of 1 − amp·cos twice a turn.
type cogs struct {
	wheel   Wheel
	rate    float64
	seconds float64
	rpm     float64
	ramp    float64
	ripple  float64
	u0      float64
	coil    bool // a coil's signal, two lobes with the mark on the steep fall between them, as high as the speed; else a tooth half a pitch wide
	height  float64
	noise   float64
	seed    uint64
	scale   func(turn, mark int) float64
	extra   func(turns float64) float64
}

func usualCogs() cogs {
	return cogs{wheel: Wheel{Teeth: 60, Missing: 2}, rate: 25600, seconds: 4, rpm: 600, u0: -0.3, height: 10000, noise: 40}
}

func (s cogs) turns(t float64) float64 {
	u := s.u0 + s.rpm/60*(t+s.ramp*t*t/2)
	return u - s.ripple/(4*math.Pi)*math.Sin(4*math.Pi*u)
}

// at gives the sample position of a place of the shaft.
func (s cogs) at(turns float64) float64 {
	lo, hi := -1.0, s.seconds+1
	for range 80 {
		if m := (lo + hi) / 2; s.turns(m) < turns {
			lo = m
		} else {
			hi = m
		}
	}
	return lo * s.rate
}

func (s cogs) signal() []int32 {
	r := rand.New(rand.NewPCG(s.seed, 11))
	marks := s.wheel.pitches()
	n := len(marks) - 1
	teeth := float64(s.wheel.Teeth)
	x := make([]int32, int(s.rate*s.seconds))
	for i := range x {
		t := float64(i) / s.rate
		now := s.turns(t)
		whole := math.Floor(now)
		v, at := 0.0, (now-whole)*teeth
		from, to := max(-1, int(at)-2-len(s.wheel.Also)), min(n, int(at)+2) // marks near the place; -1 and n: over the turn's end
		for k := from; k <= n; k++ {
			if k > to {
				k = n
			}
			m, turn := 0.0, int(whole)
			switch {
			case k < 0:
				m, turn = marks[n-1]-teeth, turn-1
			case k == n:
				m, turn = teeth, turn+1
			default:
				m = marks[k]
			}
			d := at - m
			if d < -1 || d > 1 {
				continue
			}
			h := s.height
			if s.scale != nil {
				h *= s.scale(turn, (k+n)%n)
			}
			v += h * s.tooth(d)
		}
		if s.coil {
			v *= s.rpm * (1 + s.ramp*t) / 1000
		}
		if s.extra != nil {
			v += s.extra(now)
		}
		x[i] = int32(math.Round(200 + v + s.noise*r.NormFloat64()))
	}
	return x
}

// tooth gives the shape at d pitches after the mark.
func (s cogs) tooth(d float64) float64 {
	if s.coil {
		if math.Abs(d) > 0.5 {
			return 0
		}
		return -math.Sin(2*math.Pi*d) * math.Cos(math.Pi*d)
	}
	width := 0.5
	if s.wheel.Extra {
		width = 0.25
	}
	return min(max(min(0.5+d/0.08, 0.5+(width-d)/0.08), 0), 1)
}

func (s cogs) config() Config {
	c := Config{Rate: s.rate, Inputs: 1, Auto: true, Wheel: s.wheel}
	if s.rate < 10000 {
		c.MaxRPM = 1500
	}
	if s.coil {
		c.Edge = Falling
	}
	return c
}

func (s cogs) whole() int { return int(math.Floor(s.turns(s.seconds))) }

// bumpAt adds a pulse between two places of the turn, in pitches, in the turns that want says.
func bumpAt(from, to, teeth, height float64, want func(int) bool) func(float64) float64 {
	return func(n float64) float64 {
		w := math.Floor(n)
		if p := (n - w) * teeth; want(int(w)) && p >= from && p < to {
			return height
		}
		return 0
	}
}
