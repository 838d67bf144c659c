package leak

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The state with its one exponential is the formulas written out: a = (p/Ps)^(1/k), R·T along the isentrope, and the
// nozzle flow of Saint-Venant and Wantzel with powers of its own pressure ratio.
func TestStateWrittenOut(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		draw := func(lo, hi float64, name string) float64 { return rapid.Float64Range(lo, hi).Draw(t, name) }
		in := Input{K: draw(1.05, 1.67, "k"), RZ: draw(100, 4000, "rz"), Ts: draw(250, 330, "ts"), Ps: draw(1e5, 5e6, "ps")}
		in.Pd, in.Td = in.Ps*draw(1.2, 5, "ratio"), in.Ts*draw(1, 1.6, "warmer")
		st := in.states()
		p, po := in.Ps*draw(0.8, 5, "p"), in.Ps*draw(0.8, 5, "po")
		for _, comp := range []bool{true, false} {
			own, far := st.at(p, comp), st.at(po, !comp)
			rt := func(p float64, comp bool) float64 {
				e := (in.K - 1) / in.K
				if comp {
					return in.RZ * 1.03 * in.Ts * math.Pow(p/in.Ps, e)
				}
				return in.RZ * in.Td * math.Pow(p/in.Pd, e)
			}
			psi := func(r float64) float64 {
				d := 1 - r
				r = math.Max(r, math.Pow(2/(in.K+1), in.K/(in.K-1)))
				a := math.Pow(r, 1/in.K)
				return math.Sqrt(2*in.K/(in.K-1)*a*math.Max(a-r, 0)) * math.Sqrt(d/(d+soft))
			}
			rate := func(pIn, rtIn, pOut, rtOut float64) float64 {
				if pIn >= pOut {
					return -math.Sqrt(rtIn) * psi(pOut/pIn)
				}
				return math.Sqrt(rtOut) * (pOut / pIn) * psi(pIn/pOut)
			}
			for name, v := range map[string][2]float64{
				"RT":        {own.rt, rt(p, comp)},
				"suction":   {st.rate(&own, &st.suction, 1), rate(p, rt(p, comp), in.Ps, in.RZ*in.Ts)},
				"discharge": {st.rate(&own, &st.discharge, 1), rate(p, rt(p, comp), in.Pd, in.RZ*in.Td)},
				"rings":     {st.rate(&own, &far, 1), rate(p, rt(p, comp), po, rt(po, !comp))},
			} {
				if d := math.Abs(v[0] - v[1]); !(d <= 1e-7*math.Sqrt(in.RZ*in.Td)+1e-9*math.Abs(v[1])) {
					t.Fatalf("%s %g, written out %g", name, v[0], v[1])
				}
			}
		}
	})
}

// A shifted grid reads the volumes of the shifted angles.
func TestShapeShifted(t *testing.T) {
	s := machines()["fast"]()
	s.run()
	in := s.input()
	var kept shapes
	for end := range in.V {
		for _, shift := range []float64{0, 0.05, -0.31, 1.4, -3.7, 80} {
			shape := kept.of(in, end, shift)
			for i := range in.V[end] {
				v, lnV, slope := shape.at(i)
				want := in.Cylinder.Volume(end, in.deg(i)+shift)
				rise := in.Cylinder.DVolume(end, in.deg(i)+shift) / want
				if math.Abs(v/want-1) > 1e-8 || math.Abs(lnV-math.Log(want)) > 1e-8 || math.Abs(slope-rise) > 1e-7 {
					t.Fatalf("end %d, %g° + %g°: V %g, want %g; V′/V %g, want %g", end, in.deg(i), shift, v, want, slope, rise)
				}
			}
		}
	}
}

// Where the pressures on both sides are equal nothing flows, whatever rounding makes of their ratio.
func TestEqualPressuresPassNothing(t *testing.T) {
	for ps := 1e5; ps < 5e6; ps *= 1.0137 {
		in := Input{K: 1.05, RZ: 100, Ts: 250, Ps: ps, Pd: ps * 5, Td: 250}
		st := in.states()
		own := st.at(in.Pd, true)
		if g := st.rate(&own, &st.discharge, 1); !(math.Abs(g) < 1e-6*math.Sqrt(in.RZ*in.Td)) {
			t.Fatalf("at %g Pa on both sides: %g", in.Pd, g)
		}
	}
}
