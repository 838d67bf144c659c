package measure_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/gas"
	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

// plant is an invented machine of the survey; the model chooses its valves for the rated speed.
type plant struct {
	name, gas     string
	rated, ps, ts float64
	cyl           crank.Cylinder
}

var plants = []plant{
	{"hydrogen make-up, 333 rpm", "hydrogen-makeup", 333, 20e5, 308, crank.Cylinder{Bore: .40, Stroke: .32, ConRod: .80, PistonRod: .09,
		Clearance: [2]float64{.14, .16}, MassPiston: 430, MassCrosshead: 270}},
	{"carbon dioxide, 600 rpm", "carbon-dioxide", 600, 4e5, 305, crank.Cylinder{Bore: .28, Stroke: .20, ConRod: .48, PistonRod: .06,
		Clearance: [2]float64{.12, .14}, MassPiston: 95, MassCrosshead: 70}},
	{"pipeline gas, 900 rpm", "pipeline-gas", 900, 20e5, 303, crank.Cylinder{Bore: .22, Stroke: .14, ConRod: .35, PistonRod: .055,
		Clearance: [2]float64{.16, .18}, MassPiston: 60, MassCrosshead: 45}},
	{"air, 1200 rpm", "air", 1200, 8e5, 298, crank.Cylinder{Bore: .14, Stroke: .10, ConRod: .24, PistonRod: .035,
		Clearance: [2]float64{.15, .17}, MassPiston: 10, MassCrosshead: 8}},
}

// on puts the plant on the bench.
func (p plant) on(t testing.TB, ratio float64) func(*skid.Skid) {
	mix, err := gas.Named(p.gas)
	if err != nil {
		t.Fatal(err)
	}
	return func(sk *skid.Skid) {
		sk.Gas = skid.Gas{Name: p.gas, Mixture: mix}
		sk.Machine.RatedRPM, sk.Machine.MinRPM, sk.Machine.MaxRPM = p.rated, p.rated/3, 1.2*p.rated
		sk.Process.Stages = []skid.Line{{Ps: p.ps, Pd: p.ps * ratio, Ts: p.ts}}
		for i := range sk.Throws {
			sk.Throws[i].Cylinder = p.cyl
		}
		top := 2 * p.ps * ratio
		for i := range sk.Channels {
			if c := &sk.Channels[i]; c.Kind == skid.Pressure {
				c.Gain, c.Max, c.Passage = top/8, top, min(1500, 100*p.rated/60)
			}
		}
	}
}

// trial is one case of the survey.
type trial struct {
	rows []string
	run  windowtest.Run
}

// trials lists the cases. leak is set as a share of what the end delivers.
func trials(t testing.TB) []trial {
	var out []trial
	add := func(p plant, ratio, speed float64, step int, row string, ch ...model.Change) {
		rpm, set := p.rated*speed, "all"
		if p.name == "drawn at random" {
			set = "all of these"
		}
		out = append(out, trial{[]string{set, p.name, row}, windowtest.Run{Ratio: ratio, RPM: rpm, Step: step, Seed: uint64(len(out) + 1),
			Seconds: max(240/rpm, .35) + 1020/rpm, Changes: ch, Machine: p.on(t, ratio), Told: windowtest.Told{U: .3}}})
	}
	for _, p := range plants {
		for _, ratio := range []float64{1.6, 2.5, 3.6} {
			for _, speed := range []float64{1, .6} {
				add(p, ratio, speed, windowtest.Full, fmt.Sprintf("full load, ratio %.1f", ratio))
			}
		}
		add(p, 2.5, 1, windowtest.Pocket, "pocket")
		add(p, 2.5, 1, windowtest.Unloaded, "crank end idle")
		add(p, 2.5, 1, windowtest.Late, "late closing to 55°")
		// Holes of about 5 % of the end's throughput: by piston area and speed over the speed of sound.
		mix, err := gas.Named(p.gas)
		if err != nil {
			t.Fatal(err)
		}
		hole := .035 * p.cyl.Area(crank.HE) * 2 * p.cyl.Stroke * p.rated / 60 / math.Sqrt(1.3*mix.R()*p.ts)
		add(p, 2.5, 1, windowtest.Full, "leaks of about 5 %", model.Change{What: model.ValveLeak, Where: "t1.he.s1", To: hole})
		add(p, 2.5, 1, windowtest.Full, "leaks of about 5 %", model.Change{What: model.ValveLeak, Where: "t1.ce.d1", To: hole / 2})
		add(p, 2.5, 1, windowtest.Full, "leaks of about 5 %", model.Change{What: model.RingLeak, Where: "t1", To: hole})
	}
	// Drawn anew after the last constant of the package was set: machine, gas, and a duty at each load step.
	names := gas.Names()
	for seed := range uint64(8) {
		rng := rand.New(rand.NewPCG(7001+seed, 19))
		between := func(lo, hi float64) float64 { return lo + (hi-lo)*rng.Float64() }
		p := plant{name: "drawn at random", gas: names[rng.IntN(len(names))],
			rated: 250 * math.Pow(7.2, rng.Float64()), ps: between(3, 25) * 1e5, ts: between(285, 320)}
		c := &p.cyl
		c.Stroke = between(3.5, 5) * 30 / p.rated
		c.Bore = c.Stroke * between(.9, 1.8)
		c.ConRod, c.PistonRod = c.Stroke*between(2, 3), c.Bore*between(.18, .3)
		c.Clearance = [2]float64{between(.1, .25), between(.1, .25)}
		c.MassPiston, c.MassCrosshead = 2e3*c.Bore*c.Bore*c.Stroke, 1.5e3*c.Bore*c.Bore*c.Stroke
		for step, row := range []string{"drawn, full load", "drawn, pocket", "drawn, crank end idle", "drawn, late closing to 55°"} {
			left := []float64{1, .75, 1, .75}[step] // of the stroke, for what the clearance holds to expand into
			room := max(c.Clearance[0], c.Clearance[1]) + []float64{0, .25, 0, 0}[step]
			most := math.Pow(1+.8*left/room, 1.2) // some gas must be left to deliver
			add(p, min(between(1.3, 5), most), between(.5, 1.1), step, row)
		}
	}
	return out
}

// errors collects, by quantity, measured against true: per cent, for reversal degrees.
type faults [6][]float64

var faultNames = [6]string{"indicated power", "capacity by suction", "capacity by discharge", "gas delivered", "isentropic efficiency", "reversal"}

// weigh runs a trial: medians over its turns and ends against the means of the model's books; reversal turn by turn.
func weigh(t testing.TB, r windowtest.Run) (out faults) {
	type books struct{ work, mass, n float64 }
	var truth [2]books
	var got [2][5][]float64
	rise := math.NaN()
	sk := r.Skid()
	line := sk.Process.Stages[0]
	if m := sk.Gas.Mixture; m != nil {
		path, err := m.Isentropic(line.Ts, line.Ps, line.Pd)
		if err != nil {
			t.Fatal(err)
		}
		rise = path.Work()
	}
	var at [2][5]int
	rev := -1
	each(t, r, func(_ int64, tn windowtest.Turn, _ window.Result, v *measure.Vector, l measure.Layout) {
		if rev < 0 {
			rev = l.Find("t1", "reversal_deg")
			for e, end := range []string{"t1.he", "t1.ce"} {
				for k, n := range []string{"indicated_work_j", "capacity_suction_kg_h", "capacity_discharge_kg_h", "delivered_kg_h", "isentropic_efficiency_percent"} {
					at[e][k] = l.Find(end, n)
				}
			}
		}
		for e := range truth {
			tr := &tn.Truth[0][e]
			if tr.Rev < 0 || tr.Idle {
				continue
			}
			b := &truth[e]
			b.work, b.mass, b.n = b.work+tr.Work, b.mass+tr.Delivered*tr.RPM/60, b.n+1
			for k, i := range at[e] {
				if x := v.V[i]; !math.IsNaN(x) {
					got[e][k] = append(got[e][k], x)
				}
			}
		}
		if tr := &tn.Truth[0][0]; tr.Rev >= 0 && !math.IsNaN(v.V[rev]) {
			out[5] = append(out[5], v.V[rev]-tr.Pin.Longest)
		}
	})
	for e, b := range truth {
		if b.n == 0 {
			continue
		}
		want := [5]float64{b.work / b.n, b.mass / b.n, b.mass / b.n, b.mass / b.n, b.mass * rise / (b.work * r.RPM / 60)}
		for k, x := range got[e] {
			if len(x) > int(b.n)/2 {
				out[k] = append(out[k], 100*(mid(x)/want[k]-1))
			}
		}
	}
	return out
}

func (f *faults) add(g faults) {
	for k := range f {
		f[k] = append(f[k], g[k]...)
	}
}

// row gives the median of an error, and of its size the 95th percentile and the largest.
func (f *faults) row(name string, n int) string {
	s := fmt.Sprintf("| %s | %d |", name, n)
	for _, x := range f {
		if len(x) == 0 {
			s += " – |"
			continue
		}
		a := make([]float64, len(x))
		for i := range x {
			a[i] = math.Abs(x[i])
		}
		sort.Float64s(a)
		s += fmt.Sprintf(" %+.2f, %.2f, %.2f |", mid(x), a[int(.95*float64(len(a)-1)+.5)], a[len(a)-1])
	}
	return s
}

// Measures against the model's own books. With angle and transmitters right what is left is the method's error; with the
// dead centre told 0.15° late (one standard deviation of a U of 0.3°) and transmitters off by 0.3 % of suction pressure
// and 0.2 % of gain (one standard deviation) it is that of an installation.
func TestAccuracy(t *testing.T) {
	list := trials(t)
	if !*sweep {
		list = []trial{list[38]}
	}
	for _, how := range []struct {
		name string
		late float64
		off  float64
	}{{"angle and transmitters right", 0, 0}, {"dead centre 0.15° late, transmitters off", .15, 1}} {
		if how.off > 0 && !*sweep {
			break
		}
		rows, count, names := map[string]*faults{}, map[string]int{}, []string{}
		for _, c := range list {
			c.run.Told.LateDeg = how.late
			c.run.Params = func(p *model.Params) { p.GaugeError = how.off }
			f := weigh(t, c.run)
			for k, most := range [6]float64{.3, 99, 99, 2, 99, 1} {
				for _, x := range f[k] {
					if math.Abs(x) > most {
						t.Logf("%v %.0f rpm: %s is off by %.2f", c.rows[1:], c.run.RPM, faultNames[k], x)
					}
				}
			}
			for _, r := range c.rows {
				if rows[r] == nil {
					rows[r] = &faults{}
					names = append(names, r)
				}
				rows[r].add(f)
				count[r]++
			}
		}
		t.Logf("%s: %v", how.name, faultNames)
		for _, n := range names {
			t.Log(rows[n].row(n, count[n]))
		}
		if how.off > 0 {
			continue // measured, not judged
		}
		// 0.3 %, 2 % and 1° are asked for.
		for k, most := range map[int]float64{0: .3, 3: 2, 5: 1} {
			for _, x := range rows["all"][k] { // those drawn at random are shown
				if !(math.Abs(x) <= most) {
					t.Errorf("%s is off by %.2f", faultNames[k], x)
				}
			}
			if len(rows["all"][k]) == 0 {
				t.Errorf("%s was never measured", faultNames[k])
			}
		}
	}
}
