package duty

import (
	"bytes"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/measure"
)

var testLayout = measure.Layout{
	{Subject: "t1.he", Name: "n_exp_late", Scale: 1},
	{Subject: "t1.he", Name: "discharge_opens_late_deg", Scale: 1},
	{Subject: "t1.he", Name: "ve_suction_percent", Scale: 100}, // SI: a share
	{Subject: "t1.he.suction.opens", Name: "impact_ln", Scale: 1, Class: measure.Vibration},
	{Subject: "t2.he", Name: "n_exp_late", Scale: 1, Throw: 1},
}

// plant is a healthy machine as a smooth function of duty with correlated noise.
type plant struct {
	r         *rand.Rand
	ar        [4]float64
	turn      int64
	phi       float64
	wild      float64 // share of wild turns
	ratio     float64
	rpm, ps   float64
	leakShift [4]float64
}

func (p *plant) next() (Point, measure.Vector) {
	lr, n, lp := math.Log(p.ratio), p.rpm/750-1, math.Log(p.ps/20e5)
	mean := [4]float64{1.27 + 0.004*lr, 0.3*lr + 0.2*n - 0.4*lr*lr, 0.85 - 0.10*lr - 0.03*n + 0.01*lp, 1.1 + 0.5*lr + 0.6*n}
	sd := [4]float64{0.002, 0.15, 0.0015, 0.15}
	v := measure.Vector{Turn: p.turn, RPM: p.rpm, V: make([]float64, len(testLayout))}
	for i := range mean {
		p.ar[i] = p.phi*p.ar[i] + math.Sqrt(1-p.phi*p.phi)*p.r.NormFloat64()
		v.V[i] = mean[i] + sd[i]*(p.ar[i]) + p.leakShift[i]
		if p.r.Float64() < p.wild {
			v.V[i] += 50 * sd[i]
		}
	}
	v.V[4] = nan
	pt := Point{State: Steady, Step: 1, RPM: p.rpm, Ps: p.ps, Pd: p.ps * p.ratio, OwnStep: 1, OwnPs: 0.99 * p.ps, OwnPd: 1.01 * p.ps * p.ratio}
	p.turn++
	return pt, v
}

func learnt(t testing.TB, seed uint64, turns int, move func(p *plant, i int), phi, wild float64) *Baseline {
	p := &plant{r: rand.New(rand.NewPCG(seed, 1)), ratio: 2.5, rpm: 750, ps: 20e5, phi: phi, wild: wild}
	l := NewLearner(testLayout, LearnConfig{Steps: []int{1, 2}, Throws: 1})
	for i := range turns {
		if move != nil {
			move(p, i)
		}
		pt, v := p.next()
		l.Add(0, pt, &v)
	}
	b, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// roam visits the duties of an ordinary week in runs of 60 turns.
func roam(p *plant, i int) {
	if i%60 == 0 {
		p.ratio, p.rpm, p.ps = 1.8+1.8*p.r.Float64(), 500+500*p.r.Float64(), 20e5*(0.9+0.2*p.r.Float64())
	}
}

// The regression finds what was planted, also through one wild turn in twenty.
func TestLearnsWhatWasPlanted(t *testing.T) {
	for name, wild := range map[string]float64{"clean": 0, "one turn in twenty wild": 0.05} {
		t.Run(name, func(t *testing.T) {
			b := learnt(t, 3, 3000, roam, 0.1, wild)
			ref, err := b.Reference(testLayout)
			if err != nil {
				t.Fatal(err)
			}
			sd := [4]float64{0.002, 0.15, 0.0015, 0.15}
			for _, d := range []struct{ ratio, rpm, ps float64 }{{2, 600, 20e5}, {3, 900, 19e5}, {2.7, 750, 21e5}, {2.2, 950, 20e5}} {
				lr, n, lp := math.Log(d.ratio), d.rpm/750-1, math.Log(d.ps/20e5)
				mean := [4]float64{1.27 + 0.004*lr, 0.3*lr + 0.2*n - 0.4*lr*lr, 0.85 - 0.10*lr - 0.03*n + 0.01*lp, 1.1 + 0.5*lr + 0.6*n}
				v := measure.Vector{V: []float64{1, 1, 1, 1, 1}}
				for i, dev := range ref.Deviate(nil, 0, Point{State: Steady, Step: 1, RPM: d.rpm, Ps: d.ps, Pd: d.ps * d.ratio}, &v) {
					if !dev.Seen {
						t.Fatalf("%+v not seen", d)
					}
					// Standard error of a 7-term fit on 3000 turns is about 0.06 sd; allow 0.25 with the wild ones.
					if e := math.Abs(dev.Expected-mean[i]) / sd[i]; e > 0.25 {
						t.Errorf("%+v feature %d: expected %.5g, planted %.5g (%.2f sd)", d, i, dev.Expected, mean[i], e)
					}
				}
			}
			for _, m := range b.Cells[0].Models {
				i := testLayout.Find(m.Subject, m.Name)
				if r := m.Spread / sd[i]; r < 0.9 || r > 1.2 {
					t.Errorf("%s: spread %.3g is %.2f of the planted one", m.Name, m.Spread, r)
				}
			}
		})
	}
}

// Closed form: with clean data on a plane, weighted least squares gives the plane back to rounding (ridge aside).
func TestRobustFitIsExactOnAPlane(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := [3]float64{rapid.Float64Range(-5, 5).Draw(t, "c0"), rapid.Float64Range(-5, 5).Draw(t, "c1"), rapid.Float64Range(-5, 5).Draw(t, "c2")}
		var x [][numTerms]float64
		var y []float64
		for i := range 100 {
			u, v := float64(i%10)/4.5-1, float64(i/10)/4.5-1
			x = append(x, [numTerms]float64{1, u, v})
			val := c[0] + c[1]*u + c[2]*v
			if i%23 == 0 {
				val += 100 // wild
			}
			y = append(y, val)
		}
		got, _, _, err := robust(x, y)
		if err != nil {
			t.Fatal(err)
		}
		for i := range c {
			// The ridge (0.5 turns on about 40 turns' worth of u²) pulls slopes by 1.3 %.
			if math.Abs(got[i]-c[i]) > 0.015*math.Abs(c[i])+0.01 {
				t.Fatalf("coefficient %d: %g, want %g", i, got[i], c[i])
			}
		}
	})
}

// The spread of healthy blocks is what the model says, over new healthy turns with correlated noise under roaming duty.
func TestBlockSpreadIsHonest(t *testing.T) {
	for _, phi := range []float64{0, 0.3, 0.6} {
		b := learnt(t, 5, 4000, roam, phi, 0.01)
		ref, err := b.Reference(testLayout)
		if err != nil {
			t.Fatal(err)
		}
		blocks := NewBlocks(ref, BlockConfig{})
		p := &plant{r: rand.New(rand.NewPCG(99, 2)), ratio: 2.5, rpm: 750, ps: 20e5, phi: phi, wild: 0.01}
		var z [4][]float64
		n, unseen := 0, 0
		var devs []Deviation
		for i := range 9000 {
			roam(p, i)
			pt, v := p.next()
			if ok, _ := ref.Seen(0, pt); !ok {
				unseen++
			}
			devs = ref.Deviate(devs[:0], 0, pt, &v)
			if blk, ok := blocks.Add(0, pt, &v, devs); ok {
				n++
				for _, d := range blk.Dev {
					z[d.Feature] = append(z[d.Feature], d.Z)
					if math.Abs(d.Drift) >= 1 {
						t.Errorf("phi %g: slow test signalled on a healthy machine, feature %d", phi, d.Feature)
					}
				}
			}
		}
		if unseen > 9000/5 {
			t.Errorf("phi %g: %d of 9000 turns at duties it claims not to know", phi, unseen)
		}
		for i := range z {
			ss, worst := 0.0, 0.0
			for _, v := range z[i] {
				ss += v * v
				worst = math.Max(worst, math.Abs(v))
			}
			rms := math.Sqrt(ss / float64(len(z[i])))
			t.Logf("phi %g feature %d: %d blocks, rms z %.2f, largest %.1f", phi, i, len(z[i]), rms, worst)
			// Floors make z smaller than 1; above 1.2 the spread would be a boast.
			if rms > 1.2 || rms < 0.1 || worst > 5 {
				t.Errorf("phi %g feature %d: rms z %.2f, largest %.1f", phi, i, rms, worst)
			}
		}
	}
}

func TestUnseenDutyIsSaid(t *testing.T) {
	fixed := learnt(t, 1, 300, nil, 0, 0)
	wide := learnt(t, 1, 4000, roam, 0, 0)
	// Ratio and speed always together: their combination is what is not known.
	tied := learnt(t, 1, 2000, func(p *plant, i int) {
		if i%60 == 0 {
			u := p.r.Float64()
			p.ratio, p.rpm = 2+u, 600+300*u+2*p.r.NormFloat64()
		}
	}, 0, 0)
	for name, c := range map[string]struct {
		b    *Baseline
		p    Point
		want string // part of the reason; empty: seen
	}{
		"where it was":           {fixed, Point{Step: 1, RPM: 750, Ps: 20e5, Pd: 50e5}, ""},
		"another ratio":          {fixed, Point{Step: 1, RPM: 750, Ps: 20e5, Pd: 52e5}, "pressure ratio 2.60 is outside"},
		"another speed":          {fixed, Point{Step: 1, RPM: 800, Ps: 20e5, Pd: 50e5}, "speed 800 rpm is outside"},
		"another level":          {fixed, Point{Step: 1, RPM: 750, Ps: 22e5, Pd: 55e5}, "suction pressure 22.00 bar is outside"},
		"another step":           {fixed, Point{Step: 2, RPM: 750, Ps: 20e5, Pd: 50e5}, "load step 2 was not learnt"},
		"no pressure":            {fixed, Point{Step: 1, RPM: 750, Ps: nan, Pd: 50e5}, "not known"},
		"a wide run knows it":    {wide, Point{Step: 1, RPM: 800, Ps: 20.5e5, Pd: 52e5}, ""},
		"beyond the wide run":    {wide, Point{Step: 1, RPM: 800, Ps: 20e5, Pd: 90e5}, "pressure ratio 4.50 is outside"},
		"on the beaten track":    {tied, Point{Step: 1, RPM: 750, Ps: 20e5, Pd: 50e5}, ""},
		"off the beaten track":   {tied, Point{Step: 1, RPM: 620, Ps: 20e5, Pd: 58e5}, "this combination"},
		"without process values": {wide, Point{Step: 1, Inferred: true, RPM: 800, Ps: 20e5, Pd: 52e5}, ""},
	} {
		t.Run(name, func(t *testing.T) {
			ref, err := c.b.Reference(testLayout)
			if err != nil {
				t.Fatal(err)
			}
			ok, why := ref.Seen(0, c.p)
			if ok != (c.want == "") || !strings.Contains(why, c.want) {
				t.Errorf("seen %v, %q; want %q", ok, why, c.want)
			}
			for _, d := range ref.Deviate(nil, 0, c.p, &measure.Vector{V: []float64{1, nan, 1, 1, 1}}) {
				if d.Seen != ok || d.Feature == 1 || d.Feature == 4 {
					t.Errorf("deviation %+v", d)
				}
			}
		})
	}
}

func TestBlocksKeepToTheirRules(t *testing.T) {
	b := learnt(t, 1, 600, nil, 0, 0)
	ref, err := b.Reference(testLayout)
	if err != nil {
		t.Fatal(err)
	}
	p := &plant{r: rand.New(rand.NewPCG(7, 7)), ratio: 2.5, rpm: 750, ps: 20e5}
	feed := func(bl *Blocks, n int, do func(i int, pt *Point, v *measure.Vector)) (out []Block) {
		for i := range n {
			pt, v := p.next()
			do(i, &pt, &v)
			if blk, ok := bl.Add(0, pt, &v, ref.Deviate(nil, 0, pt, &v)); ok {
				out = append(out, blk)
			}
		}
		return out
	}
	if got := feed(NewBlocks(ref, BlockConfig{}), 45, func(int, *Point, *measure.Vector) {}); len(got) != 3 || !got[0].Settled || got[0].Turn1-got[0].Turn0 != 14 || len(got[0].Dev) != 4 {
		t.Errorf("45 steady turns: %+v", got)
	}
	if got := feed(NewBlocks(ref, BlockConfig{}), 15, func(i int, pt *Point, v *measure.Vector) {
		v.V[1] = nan
		if i >= 7 {
			v.V[2] = nan
		}
		if i == 3 {
			pt.State = Changing
		}
	}); len(got) != 1 || got[0].Settled || len(got[0].Dev) != 2 {
		t.Errorf("absent features, one changing turn: %+v", got)
	}
	if got := feed(NewBlocks(ref, BlockConfig{}), 40, func(i int, pt *Point, v *measure.Vector) {
		if i%2 == 0 {
			pt.State = Starting
		}
	}); len(got) != 1 {
		t.Errorf("starting turns were taken: %d blocks", len(got))
	}
	if got := feed(NewBlocks(ref, BlockConfig{}), 30, func(i int, pt *Point, v *measure.Vector) {
		if i >= 10 {
			pt.Step, pt.Inferred, pt.Ps, pt.Pd = pt.OwnStep, true, pt.OwnPs, pt.OwnPd
		}
	}); len(got) != 1 || !got[0].Point.Inferred {
		t.Errorf("a block mixes two duties: %+v", got)
	}
	if got := feed(NewBlocks(ref, BlockConfig{Spacing: 3}), 45, func(int, *Point, *measure.Vector) {}); len(got) != 1 || got[0].Turn1-got[0].Turn0 != 42 {
		t.Errorf("spacing 3: %+v", got)
	}
}

func TestBaselineTravelsAsJSON(t *testing.T) {
	a, again := learnt(t, 9, 2000, roam, 0.2, 0.01), learnt(t, 9, 2000, roam, 0.2, 0.01)
	x, err := a.Encode()
	if err != nil {
		t.Fatal(err)
	}
	y, _ := again.Encode()
	if !bytes.Equal(x, y) {
		t.Error("the same turns gave another baseline")
	}
	b, err := ParseBaseline(x)
	if err != nil {
		t.Fatal(err)
	}
	z, _ := b.Encode()
	if !bytes.Equal(x, z) {
		t.Error("a baseline changes by being written and read")
	}
	if _, err := b.Reference(testLayout[:3]); err == nil {
		t.Error("bound to another layout")
	}
	for _, c := range a.Compare(b) {
		if c.Spreads != 0 {
			t.Errorf("compared with itself: %+v", c)
		}
	}
	moved := learnt(t, 10, 2000, func(p *plant, i int) { roam(p, i); p.leakShift[0] = 0.01 }, 0.2, 0.01)
	for _, c := range a.Compare(moved) {
		if c.Name == "n_exp_late" && (c.Spreads < 6 || math.Abs(c.New-c.Old-0.01) > 0.001) {
			t.Errorf("a shift of 0.01 reads %+v", c)
		}
	}
}

func TestTooLittleIsRefused(t *testing.T) {
	l := NewLearner(testLayout, LearnConfig{Steps: []int{1, 2}, Throws: 1})
	p := &plant{r: rand.New(rand.NewPCG(1, 1)), ratio: 2.5, rpm: 750, ps: 20e5}
	for range 30 {
		pt, v := p.next()
		l.Add(0, pt, &v)
	}
	if _, err := l.Fit(Header{}); err == nil || !strings.Contains(err.Error(), "at least 45") {
		t.Errorf("error %v", err)
	}
	cov := l.Coverage()
	if len(cov) != 3 || cov[0].Missing != "570 more steady turns" || !strings.Contains(cov[2].Missing, "has not been run") {
		t.Errorf("coverage %+v", cov)
	}
}

// Thinning keeps the memory bounded and the answer the same.
func TestLongRunIsThinned(t *testing.T) {
	l := NewLearner(testLayout, LearnConfig{MaxTurns: 900})
	p := &plant{r: rand.New(rand.NewPCG(1, 1)), ratio: 2.5, rpm: 750, ps: 20e5, phi: 0.5}
	for range 8000 {
		pt, v := p.next()
		l.Add(0, pt, &v)
	}
	if n := len(l.cells[0].turn); n >= 900 || n < 300 {
		t.Errorf("%d turns kept", n)
	}
	b, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	if b.Cells[0].Turns != 8000 {
		t.Errorf("%d turns said", b.Cells[0].Turns)
	}
	for _, m := range b.Cells[0].Models {
		if math.Abs(m.Lag1-0.5) > 0.12 {
			t.Errorf("%s: lag-1 %g, planted 0.5", m.Name, m.Lag1)
		}
	}
}

func FuzzParseBaseline(f *testing.F) {
	b := learnt(f, 9, 300, nil, 0, 0)
	x, _ := b.Encode()
	f.Add(x)
	f.Add([]byte(`{"version":1,"cells":[{"throw":0}]}`))
	f.Add([]byte(`{`))
	f.Fuzz(func(t *testing.T, data []byte) {
		b, err := ParseBaseline(data)
		if err != nil {
			return
		}
		b.LayoutHash = layoutHash(testLayout)
		ref, err := b.Reference(testLayout)
		if err != nil {
			t.Fatal(err)
		}
		ref.Deviate(nil, 0, Point{State: Steady, Step: 1, RPM: 750, Ps: 20e5, Pd: 50e5}, &measure.Vector{V: []float64{1, 1, 1, 1, 1}})
	})
}
