package datum

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"lapwing/internal/crank"
)

// sealed is a cylinder without heat and leaks: p V^k = constant on every stroke, between the lines (any textbook). The
// volumes are written out here.
type sealed struct {
	cyl    crank.Cylinder // true
	offset float64        // degrees, true angle less the grid's
	zero   [2]float64     // Pa
	k      float64
}

var plain = sealed{cyl: crank.Cylinder{Bore: .254, Stroke: .1524, ConRod: .381, PistonRod: .0635, Clearance: [2]float64{.18, .20}}, k: 1.3}

func (s sealed) input(told crank.Cylinder) *Input {
	in := &Input{Cylinder: told, Lo: -60, Step: 1}
	const ps, ts, rz = 20e5, 300., 500.
	for _, ratio := range []float64{1.6, 2.2, 3, 4} {
		for _, rpm := range []float64{600, 800} {
			d := Duty{Ps: ps, Pd: ratio * ps, Ts: ts, K: s.k, RZ: rz, Omega: []float64{rpm * math.Pi / 30}, Turns: 32}
			for e := range 2 {
				for i := range 481 {
					deg := -60 + float64(i) + s.offset
					p := s.press(e, deg, ps, ratio*ps)
					kind := Expansion
					if math.Mod(deg+720, 360) >= 180 == (e == crank.HE) {
						kind = Compression
					}
					if p > ps && p < ratio*ps && deg >= 0 && deg < 360 {
						r := &d.Closed[e][kind]
						if r.To == 0 {
							r.From = i
						}
						r.To = i + 1
					}
					d.P[e] = append(d.P[e], p+s.zero[e])
				}
			}
			in.Duties = append(in.Duties, d)
		}
	}
	return in
}

func (s sealed) press(e int, deg, ps, pd float64) float64 {
	c := s.cyl
	r, a := c.Stroke/2, deg*math.Pi/180
	x := r*(1-math.Cos(a)) + c.ConRod - math.Sqrt(c.ConRod*c.ConRod-r*r*math.Sin(a)*math.Sin(a))
	if e == crank.CE {
		x = c.Stroke - x
	}
	v := x/c.Stroke + c.Clearance[e]
	if (math.Mod(deg+720, 360) >= 180) == (e == crank.HE) {
		return math.Min(pd, ps*math.Pow((1+c.Clearance[e])/v, s.k))
	}
	return math.Max(ps, pd*math.Pow(c.Clearance[e]/v, s.k))
}

// tight is what is known of a machine without heat and leaks.
var tight = Priors{Leak: 1e-3, LeakAt: 1e-6, Rings: 1e-3, RingsAt: 1e-6, Heat: 12, HeatShape: 1e-3, WallSD: 1e-3, K: 1e-6}

// Where nothing leaks, no heat passes and the gas is known, the answer is exact.
func TestSealedCylinder(t *testing.T) {
	for _, c := range []struct {
		offset          float64
		clearance, zero [2]float64
	}{
		{0, [2]float64{}, [2]float64{}},
		{-1.4, [2]float64{-.03, -.03}, [2]float64{-2e4, -2e4}},
	} {
		s, told := plain, plain.cyl
		s.offset, s.zero = c.offset, c.zero
		for e := range 2 {
			told.Clearance[e] += c.clearance[e]
		}
		r := Estimate(s.input(told), tight)
		if !r.Valid() {
			t.Fatal(r.Reason)
		}
		if d := r.DeadCentreDeg.X - s.offset; math.Abs(d) > .01 {
			t.Errorf("%+v: dead centre %.4f° off", c, d)
		}
		for e := range 2 {
			if d := r.Clearance[e].X - s.cyl.Clearance[e]; math.Abs(d) > 2e-4 {
				t.Errorf("%+v: clearance %d %.2g off", c, e, d)
			}
			if d := r.Zero[e].X - s.zero[e]; math.Abs(d) > 600 {
				t.Errorf("%+v: zero %d %.0f Pa off", c, e, d)
			}
		}
	}
}

// With what a healthy machine is believed to have, a machine without heat and leaks stands at the edge of what can be,
// and the intervals must still hold the truth.
func TestSealedCylinderUnderTheUsualPriors(t *testing.T) {
	s, told := plain, plain.cyl
	s.offset = .7
	told.Clearance = [2]float64{.17, .21}
	r := Estimate(s.input(told), Priors{})
	if !r.Valid() {
		t.Fatal(r.Reason)
	}
	t.Logf("dead centre %.3f ±%.3f, clearances %.4f ±%.4f, %.4f ±%.4f, k %+.4f ±%.4f, rms %.1e", r.DeadCentreDeg.X-s.offset, r.DeadCentreDeg.U,
		r.Clearance[0].X-.18, r.Clearance[0].U, r.Clearance[1].X-.20, r.Clearance[1].U, r.K.X, r.K.U, r.RMS)
	if math.Abs(r.DeadCentreDeg.X-s.offset) > math.Min(r.DeadCentreDeg.U, .2) {
		t.Errorf("dead centre off by %.3f ±%.3f°", r.DeadCentreDeg.X-s.offset, r.DeadCentreDeg.U)
	}
	for e, c := range s.cyl.Clearance {
		if d := r.Clearance[e].X - c; math.Abs(d) > math.Min(r.Clearance[e].U, .002) {
			t.Errorf("clearance %d off by %.4f ±%.4f", e, d, r.Clearance[e].U)
		}
	}
	if !reflect.DeepEqual(r, Estimate(s.input(told), Priors{})) {
		t.Error("the same input gave another answer")
	}
	if r.Duties != 8 || r.Strokes != 32 || len(r.Remarks) != 0 {
		t.Errorf("%d duties, %d strokes, remarks %q", r.Duties, r.Strokes, r.Remarks)
	}
}

// clone copies what a test may spoil.
func clone(in *Input) *Input {
	out := *in
	out.Duties = append([]Duty(nil), in.Duties...)
	for i := range out.Duties {
		for e, p := range out.Duties[i].P {
			out.Duties[i].P[e] = append([]float64(nil), p...)
		}
	}
	return &out
}

func TestRefusesAndRemarks(t *testing.T) {
	whole := plain.input(plain.cyl)
	for name, c := range map[string]struct {
		spoil  func(*Input)
		reason string
		remark string
	}{
		"none":     {func(in *Input) { in.Duties = nil }, "no duty", ""},
		"lines":    {func(in *Input) { in.Duties[1].Pd = in.Duties[1].Ps }, "duty 2: line conditions", ""},
		"no Ts":    {func(in *Input) { in.Duties[0].Ts = math.NaN() }, "duty 1: line conditions", ""},
		"gas":      {func(in *Input) { in.Duties[0].K = math.NaN() }, "gas not usable", ""},
		"speed":    {func(in *Input) { in.Duties[0].Omega = []float64{0} }, "shaft speed", ""},
		"speeds":   {func(in *Input) { in.Duties[0].Omega = []float64{1, 2} }, "2 speeds", ""},
		"grid":     {func(in *Input) { in.Duties[3].P[1] = in.Duties[3].P[1][:5] }, "5 pressures on a grid of 481", ""},
		"step":     {func(in *Input) { in.Step = 0 }, "step is 0", ""},
		"geometry": {func(in *Input) { in.Cylinder.ConRod = 0 }, "connecting rod", ""},
		"no stroke": {func(in *Input) {
			for i := range in.Duties {
				in.Duties[i].Closed = [2][2]Range{}
			}
		}, "fewer than two", ""},
		"negative": {func(in *Input) {
			for i := range in.Duties {
				for e := range 2 {
					for k := range in.Duties[i].P[e] {
						in.Duties[i].P[e][k] *= -1
					}
				}
			}
		}, "fewer than two", ""},
		"one duty":  {func(in *Input) { in.Duties = in.Duties[2:3] }, "", "one pressure ratio only"},
		"one speed": {func(in *Input) { in.Duties = []Duty{in.Duties[0], in.Duties[6]} }, "", "one speed only"},
		"few turns": {func(in *Input) { in.Duties[4].Turns = 3 }, "", "few turns"},
		"one end": {func(in *Input) {
			for i := range in.Duties {
				in.Duties[i].P[1] = nil
			}
		}, "", "one end only"},
		"bent": {func(in *Input) {
			for i := range in.Duties {
				for k := range in.Duties[i].P[0] {
					in.Duties[i].P[0][k] *= 1 + .02*math.Sin(float64(k)/9)
				}
			}
		}, "", "do not use the estimate"},
	} {
		in := clone(whole)
		c.spoil(in)
		r := Estimate(in, Priors{})
		if c.reason != "" {
			if r.Valid() || !strings.Contains(r.Reason, c.reason) || !math.IsNaN(r.DeadCentreDeg.X) || !math.IsNaN(r.Clearance[0].U) {
				t.Errorf("%s: %q, want %q", name, r.Reason, c.reason)
			}
			continue
		}
		if !r.Valid() || !strings.Contains(strings.Join(r.Remarks, "; "), c.remark) {
			t.Errorf("%s: %q, remarks %q, want %q", name, r.Reason, r.Remarks, c.remark)
		}
	}
	// What is not measured is absent.
	in := plain.input(plain.cyl)
	for i := range in.Duties {
		in.Duties[i].P[0] = nil
	}
	r := Estimate(in, Priors{})
	if !r.Valid() || !math.IsNaN(r.Clearance[0].X) || !math.IsNaN(r.Zero[0].X) || !math.IsNaN(r.Area[HS].X) || !math.IsNaN(r.Area[RG].X) || math.IsNaN(r.Clearance[1].X) {
		t.Errorf("crank end alone: %+v", r)
	}
}

func TestMean(t *testing.T) {
	var m Mean
	m.Add([2][]float64{{1, 2}, nil}, [2][2]Range{{{3, 9}, {1, 4}}}, []float64{10, 12})
	m.Add([2][]float64{{3, 6}, nil}, [2][2]Range{{{2, 8}, {}}}, []float64{11, 14})
	d := m.Duty()
	want := Duty{P: [2][]float64{{2, 4}, nil}, Closed: [2][2]Range{{{3, 8}, {1, 0}}}, Omega: []float64{10.5, 13}, Turns: 2}
	if !reflect.DeepEqual(d, want) || m.Turns() != 2 {
		t.Errorf("%+v, want %+v", d, want)
	}
}
