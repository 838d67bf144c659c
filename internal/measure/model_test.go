package measure_test

import (
	"flag"
	"fmt"
	"math"
	"testing"

	"lapwing/internal/gas"
	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

var sweep = flag.Bool("sweep", false, "run the leak check at many duties (minutes)")

// machineOf tells the layout what the skid has.
func machineOf(sk *skid.Skid) measure.Machine {
	var m measure.Machine
	for _, th := range sk.Throws {
		out := measure.Throw{ID: th.ID, Stage: th.Stage, Acoustic: len(th.Accel) > 0}
		for e, end := range th.Ends {
			out.Ends[e].Works = end.Works
			for _, v := range end.Suction {
				out.Ends[e].Suction = append(out.Ends[e].Suction, measure.Valve{ID: v.ID, Cover: v.Cover != ""})
			}
			for _, v := range end.Discharge {
				out.Ends[e].Discharge = append(out.Ends[e].Discharge, measure.Valve{ID: v.ID, Cover: v.Cover != ""})
			}
		}
		m.Throws = append(m.Throws, out)
	}
	return m
}

// base is the run that several tests compare with: healthy, constant duty.
func base() windowtest.Run {
	return windowtest.Run{Ratio: 2.5, RPM: 900, Seconds: 1.15, Seed: 3}
}

// outcome holds the median of every feature over a run, and what each turn gave, where it gave something.
type outcome struct {
	layout measure.Layout
	median []float64
	each   [][]float64
	turns  int
	absent []string
	truth  []model.Truth
}

func (o *outcome) get(t testing.TB, subject, name string) float64 {
	t.Helper()
	i := o.layout.Find(subject, name)
	if i < 0 {
		t.Fatalf("no feature %s %s", subject, name)
	}
	return o.median[i]*o.layout[i].Scale + o.layout[i].Shift
}

// done are the outcomes of runs that nothing but numbers describes: each is played once for all tests.
var done = map[string]*outcome{}

func measured(t testing.TB, r windowtest.Run) *outcome {
	t.Helper()
	key := ""
	if r.Params == nil && r.Machine == nil {
		key = fmt.Sprintf("%+v", r)
		if o := done[key]; o != nil {
			return o
		}
	}
	o := &outcome{}
	each(t, r, func(_ int64, tn windowtest.Turn, _ window.Result, v *measure.Vector, l measure.Layout) {
		if o.layout == nil {
			o.layout, o.median, o.absent, o.each = l, make([]float64, len(l)), make([]string, len(l)), make([][]float64, len(l))
		}
		o.turns++
		for i, x := range v.V {
			if math.IsNaN(x) {
				o.absent[i] = v.Why[i]
			} else {
				o.each[i] = append(o.each[i], x)
			}
		}
		o.truth = append(o.truth, tn.Truth[0][0], tn.Truth[0][1])
	})
	for i, x := range o.each {
		o.median[i] = math.NaN()
		if len(x) > o.turns/2 {
			o.median[i] = mid(x)
		}
	}
	if key != "" {
		done[key] = o
	}
	return o
}

type turnUse func(n int64, tn windowtest.Turn, w window.Result, v *measure.Vector, l measure.Layout)

// each measures a run turn by turn.
func each(t testing.TB, r windowtest.Run, use turnUse) {
	t.Helper()
	eachAltered(t, r, nil, use)
}

// eachAltered lets the windows be changed before measuring.
func eachAltered(t testing.TB, r windowtest.Run, alter func(window.Result), use turnUse) {
	t.Helper()
	sk := r.Skid()
	var g gas.Gas = sk.Gas.Fixed
	if sk.Gas.Mixture != nil {
		g = sk.Gas.Mixture
	}
	book := map[[3]float64]measure.Gas{}
	m := measure.New(measure.Config{Machine: machineOf(sk), Atmosphere: sk.Machine.Atmosphere})
	tr := window.NewTracker(window.Config{})
	var v measure.Vector
	var wi []window.Input
	var mi []measure.Input
	r.Turns(t, max(.35, 240/r.RPM), func(tn windowtest.Turn) {
		wi, mi = wi[:0], mi[:0]
		for i, th := range sk.Throws {
			line := tn.Process.Stages[th.Stage-1]
			duty := [3]float64{math.Round(200 * math.Log(line.Ps)), math.Round(line.Ts), math.Round(200 * math.Log(line.Pd))}
			p, known := book[duty]
			if !known {
				var err error
				if p, err = measure.NewGas(g, math.Exp(duty[0]/200), duty[1], math.Exp(duty[2]/200)); err != nil {
					t.Fatal(err)
				}
				book[duty] = p
			}
			c := sk.CylinderAt(i, tn.Process.Step)
			wi = append(wi, window.Input{Cylinder: c, K: p.KV, LinePs: line.Ps, LinePd: line.Pd})
			mi = append(mi, measure.Input{Cylinder: c, LinePs: line.Ps, LinePd: line.Pd, Ts: line.Ts, Td: line.Td,
				Gas: p, Covers: tn.Process.Covers})
		}
		w := tr.Track(tn.Turn, wi)
		if alter != nil {
			alter(w)
		}
		m.Measure(&v, tn.Turn, w, mi)
		use(tn.Number, tn, w, &v, m.Layout())
	})
}

// The signs and the rough size of leakage, methods.md section 1.3 (computed there on another model), per 1 % of the
// end's capacity at ratio 2.5, and which area and which noise shape rises most.
func TestLeaksOnTheModel(t *testing.T) {
	leaksAt(t, base(), 10, .15)
	if !*sweep {
		return
	}
	for _, ratio := range []float64{1.8, 2.5, 3.6} {
		for _, rpm := range []float64{500, 750, 1000} {
			for _, size := range []float64{4, 10, 25} {
				t.Run(fmt.Sprintf("ratio %.1f, %g rpm, %g mm²", ratio, rpm, size), func(t *testing.T) {
					leaksAt(t, windowtest.Run{Ratio: ratio, RPM: rpm, Seconds: 4, Seed: 5, Throws: 2}, size, .15)
				})
			}
		}
	}
}

// leaksAt compares the healthy machine with one that leaks size mm² on each path of throw 1 in turn; areas may be off
// by a share of the size.
func leaksAt(t *testing.T, base windowtest.Run, size, share float64) {
	t.Helper()
	healthy := measured(t, base)
	paths := []string{"t1.he.suction", "t1.he.discharge", "t1.ce.suction", "t1.ce.discharge", "t1.rings"}
	for j, v := range []struct {
		what  model.What
		where string
		end   string
		// signs of n_comp_early, n_comp_late, n_exp_early, n_exp_late, discharge late, suction late, VE_s, VE_d, balance
		signs [9]float64
		pair  string // the path that noise may take it for: nearly the same angles
	}{
		{model.ValveLeak, "t1.he.s1", "t1.he", [9]float64{-1, -1, 1, 1, 1, -1, 1, -1, 1}, "t1.ce.discharge"},
		{model.ValveLeak, "t1.he.d1", "t1.he", [9]float64{1, 1, -1, -1, -1, 1, -1, 1, -1}, "t1.ce.suction"},
		{model.ValveLeak, "t1.ce.s1", "t1.ce", [9]float64{-1, -1, 1, 1, 1, -1, 1, -1, 1}, "t1.he.discharge"},
		{model.ValveLeak, "t1.ce.d1", "t1.ce", [9]float64{1, 1, -1, -1, -1, 1, -1, 1, -1}, "t1.he.suction"},
		{model.RingLeak, "t1", "t1.he", [9]float64{-1, -1, 1, 1, 0, -1, 1, 0, 1}, "t1.he.suction"},
	} {
		if !*sweep && (j == 1 || j == 2) { // of each kind one
			continue
		}
		r := base
		r.Changes = []model.Change{{What: v.what, Where: v.where, To: size * model.MM2}}
		o := measured(t, r)
		move := func(subject, name string) float64 { return o.get(t, subject, name) - healthy.get(t, subject, name) }
		for i, name := range []string{"n_comp_early", "n_comp_late", "n_exp_early", "n_exp_late", "discharge_opens_late_deg",
			"suction_opens_late_deg", "ve_suction_percent", "ve_discharge_percent", "flow_balance"} {
			if i > 5 && size < 10 { // a small leak shifts the suction closing too, and the fill with it
				break
			}
			if d := move(v.end, name); d*v.signs[i] < -.002 {
				t.Errorf("%s leaks: %s %s moves by %+.4f", v.where, v.end, name, d)
			}
		}
		best, shape, shapeAt := "", math.Inf(-1), ""
		most := math.Inf(-1)
		for i, p := range paths {
			area := move(p, "leak_area_mm2")
			if area > most {
				most, best = area, p
			}
			if s := move(p, "leak_shape"); s > shape {
				shape, shapeAt = s, p
			}
			want := 0.0
			if i == j {
				want = size
			}
			// At ratio 1.8 the median of a run of 4 s is only known to about 1 mm².
			if math.Abs(area-want) > max(share*size, 1.2) {
				t.Errorf("%s leaks %g mm²: area of %s moves by %+.2f", v.where, size, p, area)
			}
		}
		if best != paths[j] {
			t.Errorf("%s leaks: largest area is that of %s", v.where, best)
		}
		if shapeAt != paths[j] && shapeAt != v.pair {
			t.Errorf("%s leaks: noise has the shape of %s", v.where, shapeAt)
		}
		if d := move(paths[j], "leak_noise_db"); d < .2*size {
			t.Errorf("%s leaks: noise rises by %.1f dB only", v.where, d)
		}
		t.Logf("%-10s area %s %+.2f mm², noise %+.1f dB, shape names %s", v.where, best, most, move(paths[j], "leak_noise_db"), shapeAt)
	}
	// Against the model's own books: work to 1 %, delivered mass to 5 % (suction reads high by charge heating:
	// windows.md section 4 has +1.6 points [−2.1, +3.5]).
	for e, end := range []string{"t1.he", "t1.ce"} {
		var work, mass, n float64
		for _, tr := range healthy.truth {
			if tr.Rev >= 0 && tr.End == e {
				work += tr.Work
				mass += tr.Delivered * tr.RPM * 60
				n++
			}
		}
		if n == 0 {
			t.Fatal("no truth")
		}
		for _, v := range []struct {
			name      string
			want, tol float64
		}{{"indicated_work_j", work / n, .01}, {"capacity_suction_kg_h", mass / n, .05}, {"capacity_discharge_kg_h", mass / n, .05}} {
			got := healthy.get(t, end, v.name)
			t.Logf("%s %s %.1f, true %.1f (%+.2f %%)", end, v.name, got, v.want, 100*(got/v.want-1))
			if math.Abs(got/v.want-1) > v.tol {
				t.Errorf("%s %s = %.1f, true %.1f", end, v.name, got, v.want)
			}
		}
	}
	for i, f := range healthy.layout {
		if math.IsNaN(healthy.median[i]) && healthy.absent[i] == "" {
			t.Errorf("%s %s is absent without a reason", f.Subject, f.Name)
		}
	}
}
