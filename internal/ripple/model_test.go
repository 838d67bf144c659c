package ripple

import (
	"math"
	"testing"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/dsp"
	"lapwing/internal/frame"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// The modelled machine with orifice valves, wall heat, pulsation, gauge passages and noise. Its ripple is worked out
// here, not by the package: pressures sampled at even speed, torque by dV/dθ taken numerically from the piston's
// position, inertia forces likewise, Fourier sums, and given to the model. Then the whole way from the phase pulse to
// the angle map, one mark a turn, is held against the shaft's true angle.
func TestComputedRippleOnTheModel(t *testing.T) {
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse("m.yaml", raw)
	if err != nil {
		t.Fatal(err)
	}
	const rpm, rate, step = 740.0, 20480.0, 2 // t1 head end unloaded
	m := Machine{Inertia: 14, Atmosphere: sk.Machine.Atmosphere}
	for i := range sk.Throws {
		m.Throws = append(m.Throws, Throw{Cylinder: sk.Throws[i].Cylinder, DeadCentreDeg: sk.Throws[i].DeadCentre, Works: [2]bool{true, true}})
	}
	par, err := model.Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	machine := func(ripple []skid.Ripple) *model.Machine {
		par.Ripple = ripple
		mm, err := model.New(sk, model.Script{RPM: rpm, Step: step}, model.Options{Seed: 3, Rate: rate, Params: &par})
		if err != nil {
			t.Fatal(err)
		}
		return mm
	}

	ripple := prescribed(t, sk, m, machine(nil), par.StartDeg, rpm)
	t.Logf("the model's ripple: %+v", ripple)

	mm := machine(ripple)
	var blocks []*acq.Block
	for range 14 {
		b := new(acq.Block)
		mm.Fill(b, 4096)
		for i := range b.Counts {
			b.Counts[i] = append([]int32(nil), b.Counts[i]...)
		}
		blocks = append(blocks, b)
	}
	q, err := NewTorque(m)
	if err != nil {
		t.Fatal(err)
	}
	book := NewBook(Config{At: func(int) []turn.Ripple { return nil }, Torque: q})
	before := follow(t, sk, mm.Info(), blocks, turn.Marks{}, nil, ripple)
	after := follow(t, sk, mm.Info(), blocks, turn.Marks{Shaft: func(float64) turn.Shaft { return book.For(step) }}, func(tt *turn.Turn) {
		if why := book.Learn(tt, []float64{0, 0}); why != "" {
			t.Fatal(why)
		}
	}, ripple)
	x, y := dsp.Quantile(before, 0.95), dsp.Quantile(after, 0.95)
	t.Logf("p95 %.3f° ignored, %.3f° computed; %d angles", x, y, len(after))
	if len(after) < 20000 || x < 0.8 || y > 0.1 {
		t.Errorf("p95 %.3f° ignored, %.3f° computed from %d angles; want at least 0.8 and at most 0.1", x, y, len(after))
	}
}

// prescribed gives the ripple that a machine's own pressures, at even speed, put on the stated inertia.
func prescribed(t *testing.T, sk *skid.Skid, m Machine, mm *model.Machine, start, rpm float64) (out []skid.Ripple) {
	t.Helper()
	info := mm.Info()
	var b acq.Block
	perDeg := info.Rate / (6 * rpm)
	settle := int(4 * 360 * perDeg) // the gas has settled
	mm.Fill(&b, settle)
	n := int(math.Round(5 * 360 * perDeg))
	mm.Fill(&b, n)
	s := func(c crank.Cylinder, deg float64) float64 {
		r, a := c.Stroke/2, deg*rad
		return r*(1-math.Cos(a)) + c.ConRod - math.Sqrt(c.ConRod*c.ConRod-r*r*math.Sin(a)*math.Sin(a))
	}
	w := rpm * math.Pi / 30
	total := m.Inertia
	for _, th := range m.Throws {
		mean := 0.0
		for d := 0.0; d < 360; d++ {
			v := (s(th.Cylinder, d+.5) - s(th.Cylinder, d-.5)) / rad
			mean += v * v / 360
		}
		total += mean * (th.Cylinder.MassPiston + th.Cylinder.MassCrosshead)
	}
	for order := 1; order <= 4; order++ {
		var c, sn float64
		for i := range n {
			deg := start + float64(settle+i)/perDeg
			torque := 0.0
			for k := range sk.Throws {
				cyl, a := m.Throws[k].Cylinder, deg-m.Throws[k].DeadCentreDeg
				const h = 0.2
				v := (s(cyl, a+h) - s(cyl, a-h)) / (2 * h * rad)
				acc := (s(cyl, a+h) - 2*s(cyl, a) + s(cyl, a-h)) / (h * rad) / (h * rad) * w * w
				f := -acc * (cyl.MassPiston + cyl.MassCrosshead)
				for e, sign := range []float64{1, -1} {
					ch, _ := sk.ChannelByID(sk.Throws[k].Ends[e].Pressure)
					gain, offset := ch.Scale(info.Bits)
					area := math.Pi / 4 * (cyl.Bore*cyl.Bore - float64(e)*cyl.PistonRod*cyl.PistonRod)
					f += sign * (gain*float64(b.Counts[ch.Input][i]) + offset - m.Atmosphere) * area
				}
				torque += f * v
			}
			sin, cos := math.Sincos(float64(order) * deg * rad)
			c += 2 * torque * cos / float64(n)
			sn += 2 * torque * sin / float64(n)
		}
		scale := float64(order) * total * w * w
		out = append(out, skid.Ripple{Order: order, Amp: math.Hypot(c, sn) / scale, Phase: math.Atan2(c, -sn) / rad})
	}
	return out
}

// follow runs blocks through phase detection and angle map and gives the angle errors against the model's shaft:
// dθ/dt = w(1 + Σ aₙ cos(nθ − pₙ)), integrated here from mark to mark.
func follow(t *testing.T, sk *skid.Skid, info acq.Info, blocks []*acq.Block, marks turn.Marks, learn func(*turn.Turn), ripple []skid.Ripple) (errs []float64) {
	t.Helper()
	mark, _ := sk.ChannelByID(sk.Phase.Channel)
	asm, err := frame.New(frame.Config{Rate: info.Rate, Inputs: info.Channels, Channel: mark.Input, Auto: true})
	if err != nil {
		t.Fatal(err)
	}
	cfg := turn.Config{Rate: info.Rate, Marks: marks}
	for i := range sk.Throws {
		tc := turn.ThrowConfig{DeadCentreDeg: sk.Throws[i].DeadCentre}
		for e := range tc.Pressure {
			ch, _ := sk.ChannelByID(sk.Throws[i].Ends[e].Pressure)
			gain, offset := ch.Scale(info.Bits)
			tc.Pressure[e] = turn.Channel{Input: ch.Input, Gain: gain, Offset: offset}
		}
		cfg.Throws = append(cfg.Throws, tc)
	}
	conv, err := turn.New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	const fine = 0.1
	even := []float64{0} // share of the turn's time passed at k·fine degrees
	for d := fine / 2; d < 360; d += fine {
		k := 1.0
		for _, h := range ripple {
			k += h.Amp * math.Cos((float64(h.Order)*d-h.Phase)*rad)
		}
		even = append(even, even[len(even)-1]+1/k)
	}
	at := func(deg float64) float64 { // turns of time
		lap := math.Floor(deg / 360)
		x := (deg - 360*lap) / fine
		i := min(int(x), len(even)-2)
		return lap + (even[i]+(x-float64(i))*(even[i+1]-even[i]))/even[len(even)-1]
	}
	var mark0 = map[int64]float64{}
	frames := func(f *frame.Frame) {
		mark0[f.Turn], mark0[f.Turn+1] = f.Mark0, f.Mark1
		conv.Add(f, func(tt *turn.Turn) {
			if !tt.Valid() {
				return
			}
			if learn != nil {
				learn(tt)
			}
			m0 := mark0[tt.Number]
			period := mark0[tt.Number+1] - m0
			for k := range tt.Throws {
				th := &tt.Throws[k]
				var own []float64
				for i := int(th.Grid.Index(0)); i < int(th.Grid.Index(360)); i++ {
					is := m0 + period*at(sk.Throws[k].DeadCentre+th.Grid.At(i))
					own = append(own, math.Abs(th.Pos[i]-is)/period*360)
				}
				if e := dsp.Quantile(own, 0.95); learn != nil && tt.Number > 1 && e > th.U {
					t.Errorf("turn %d states ±%.2f°, 95 %% of its angles lie within %.3f°", tt.Number, th.U, e)
				}
				if tt.Number >= 10 { // the gas has settled, and the median is of settled turns
					errs = append(errs, own...)
				}
			}
		})
	}
	for _, b := range blocks {
		if err := asm.Add(b, frames); err != nil {
			t.Fatal(err)
		}
	}
	return errs
}
