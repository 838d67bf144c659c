package leak_test

import (
	"flag"
	"fmt"
	"math"
	"slices"
	"testing"

	"lapwing/internal/model"
)

var sweep = flag.Bool("sweep", false, "measure leak areas on the model over machines, duties and errors (minutes), and print the tables")

var short = [5]string{"HS", "HD", "CS", "CD", "RG"}

// middle is the median of what is not NaN; it does not change x.
func middle(x []float64) float64 { return quantile(x, .5) }

func quantile(x []float64, q float64) float64 {
	var y []float64
	for _, v := range x {
		if !math.IsNaN(v) {
			y = append(y, v)
		}
	}
	if len(y) == 0 {
		return math.NaN()
	}
	slices.Sort(y)
	p := q * float64(len(y)-1)
	i := min(int(p), len(y)-2)
	if i < 0 {
		return y[0]
	}
	return y[i] + (p-float64(i))*(y[i+1]-y[i])
}

func column(rs []reading, of func(r reading) float64) (x []float64) {
	for _, r := range rs {
		x = append(x, of(r))
	}
	return x
}

func percentOf(j int) func(reading) float64 { return func(r reading) float64 { return r.percent[j] } }

// kind is how a bench is run: trips of so many blocks or stays.
type kind struct {
	name string
	trip func(b *bench, seed uint64, step, long int) trip
	// learning runs, and how long they, a healthy run and a leaking run are
	learns, learn, healthy, leak int
}

var kinds = []kind{
	{"constant", func(b *bench, seed uint64, step, long int) trip { return b.still(seed, step, 32*long) }, 1, 16, 20, 10},
	{"swings", func(b *bench, seed uint64, step, long int) trip { return b.swing(seed, step, long) }, 2, 30, 40, 16},
}

// with is a run with more changes in it.
func (k kind) with(b *bench, seed uint64, step, long int, more ...model.Change) trip {
	v := k.trip(b, seed, step, long)
	v.changes = append(v.changes, more...)
	return v
}

func (l *line) teach(t *testing.T, k kind, step int) {
	t.Helper()
	var ts []trip
	for i := range k.learns {
		ts = append(ts, k.trip(l.bench, uint64(1+i), step, k.learn))
	}
	l.learn(t, ts...)
}

// named gives the path with the largest share of throughput lost.
func (r reading) named() int {
	best := -1
	for j, p := range r.percent {
		if !math.IsNaN(p) && (best < 0 || p > r.percent[best]) {
			best = j
		}
	}
	return best
}

type score struct{ blocks, seen, right int }

func (s *score) add(r reading, j int) {
	s.blocks++
	if r.percent[j] >= 5*r.spread[j] {
		s.seen++
		if r.named() == j {
			s.right++
		}
	}
}

func (s score) String() string {
	return fmt.Sprintf("%d/%d seen, %d/%d named", s.seen, s.blocks, s.right, s.seen)
}

func present(l *line) (js []int) {
	for j := range paths {
		if l.layout.Find(paths[j], "leak_percent") >= 0 {
			js = append(js, j)
		}
	}
	return js
}

// TestSurvey measures what the areas are worth on the model, all stages from the frame to the block in the way.
func TestSurvey(t *testing.T) {
	if !*sweep {
		t.Skip("minutes: run with -sweep")
	}
	for i := range benches {
		for _, k := range kinds {
			t.Run(benches[i].name+", "+k.name, func(t *testing.T) {
				t.Parallel()
				l := newLine(&benches[i])
				l.teach(t, k, full)
				u := l.unit(t, 50)
				l.survey(t, k, full, u, true)
			})
		}
	}
}

func (l *line) survey(t *testing.T, k kind, step int, u [5]float64, errors bool) {
	healthy := l.blocks(t, k.trip(l.bench, 50, step, k.healthy))
	worst, all := 0.0, []float64{}
	sd := ""
	js := present(l)
	js = slices.DeleteFunc(js, func(j int) bool { return math.IsNaN(middle(column(healthy, percentOf(j)))) })
	for _, j := range js {
		x := column(healthy, percentOf(j))
		all = append(all, x...)
		sd += fmt.Sprintf(" %s %.2f (%.2f)", short[j], rms(x), middle(column(healthy, func(r reading) float64 { return r.spread[j] })))
		for _, v := range x {
			if !math.IsNaN(v) {
				worst = max(worst, math.Abs(v))
			}
		}
	}
	for i := range all {
		all[i] = math.Abs(all[i])
	}
	t.Logf("| %s | %s | healthy | %d blocks, rms (learnt spread)%s | 95 %% %.2f, largest %.2f |", l.name, k.name, len(healthy), sd, quantile(all, .95), worst)
	var hits score
	sizes := []float64{1, 5}
	if errors {
		sizes = []float64{1, 2, 5}
	}
	for _, size := range sizes {
		ratios, cross := "", 0.0
		held, of := 0, 0
		for _, j := range js {
			rs := l.blocks(t, k.with(l.bench, 60+uint64(j), step, k.leak, open(j, size*u[j])))
			x := column(rs, func(r reading) float64 { return r.area[j] / (size * u[j]) })
			ratios += fmt.Sprintf(" %s %.2f (%.2f–%.2f)", short[j], middle(x), quantile(x, .05), quantile(x, .95))
			own := middle(column(rs, percentOf(j)))
			for _, o := range js {
				if o != j {
					cross = max(cross, math.Abs(middle(column(rs, percentOf(o))))/own)
				}
			}
			for _, r := range rs {
				if of++; r.covers(j, size*u[j]) {
					held++
				}
			}
			if size == 1 {
				for _, r := range rs {
					hits.add(r, j)
				}
			}
		}
		t.Logf("| %s | %s | %g %% | estimated/true%s | cross-talk %.2f | interval holds the truth %d/%d |", l.name, k.name, size, ratios, cross, held, of)
	}
	t.Logf("| %s | %s | 1 %% | %v |", l.name, k.name, hits)
	if !errors {
		if !slices.Contains(js, 4) { // rings cannot be told from suction
			text := ""
			rs := l.blocks(t, k.with(l.bench, 66, step, k.leak, open(4, 2*u[4])))
			for _, j := range js {
				text += fmt.Sprintf(" %s %.2f", short[j], middle(column(rs, percentOf(j))))
			}
			t.Logf("| %s | %s | rings leak 2 %% of full load's throughput: reads%s |", l.name, k.name, text)
		}
		return
	}
	rs := l.blocks(t, k.with(l.bench, 70, step, k.leak, open(0, 2*u[0]), open(3, u[3]), open(4, u[4])))
	three := ""
	for j := range paths {
		x := column(rs, func(r reading) float64 { return r.area[j] / u[j] })
		three += fmt.Sprintf(" %s %.2f (%.2f–%.2f)", short[j], middle(x), quantile(x, .05), quantile(x, .95))
	}
	t.Logf("| %s | %s | three at once, HS 2, CD 1, RG 1 |%s |", l.name, k.name, three)
	base := l.blocks(t, k.trip(l.bench, 80, step, k.leak))
	for _, e := range []struct {
		name   string
		change func(*trip)
	}{
		{"phase 0.5°", func(v *trip) { v.phase = .5 }},
		{"zero 1 % Ps, both", func(v *trip) {
			v.changes = append(v.changes, model.Change{What: model.PressureZero, To: .01 * l.ps})
		}},
		{"gain 1 %", func(v *trip) { v.gain = .01 }},
		{"ripple 0.3 to 0.5 %", func(v *trip) { v.ripple = .005 }},
	} {
		v := k.trip(l.bench, 80, step, k.leak)
		e.change(&v)
		got := l.blocks(t, v)
		text, worst := "", 0.0
		for j := range paths {
			d := middle(column(got, percentOf(j))) - middle(column(base, percentOf(j)))
			text += fmt.Sprintf(" %+.2f", d)
			worst = max(worst, math.Abs(d))
		}
		t.Logf("| %s | %s | %s |%s | %.2f |", l.name, k.name, e.name, text, worst)
	}
}

func rms(x []float64) float64 {
	s, n := 0.0, 0.0
	for _, v := range x {
		if !math.IsNaN(v) {
			s, n = s+v*v, n+1
		}
	}
	return math.Sqrt(s / n)
}

// TestSurveySteps measures where the structure of the problem or the load device limits the fit.
func TestSurveySteps(t *testing.T) {
	if !*sweep {
		t.Skip("minutes: run with -sweep")
	}
	b := benches[0]
	single := b
	single.name, single.single = "gas 900, single-acting", true
	for _, c := range []struct {
		name string
		b    bench
		step int
	}{{"pocket", b, pocket}, {"crank end idle", b, unloaded}, {"late, both ends", b, late}, {"late, head end", b, lateHE}, {"single-acting", single, full}} {
		for _, k := range kinds {
			t.Run(c.name+", "+k.name, func(t *testing.T) {
				t.Parallel()
				u0 := newLine(&b).unit(t, 50) // the sizes of the double-acting full load
				l := newLine(&c.b)
				l.name = c.name
				l.teach(t, k, c.step)
				l.survey(t, k, c.step, u0, false)
			})
		}
	}
}
