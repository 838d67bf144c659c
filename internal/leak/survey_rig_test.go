package leak_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/gas"
	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// The errors that stand in every run: per turn 0.1° of phase jitter (on top of the model's own mark noise) and 0.3 % of
// scatter of the line pressures told; always 0.3 % of gain error of both line transmitters, one up and one down. The
// model adds 0.03 % of span of pressure noise per sample, zero and gain errors of the transducers, 0.3 % of speed ripple
// at order 2 that one mark a turn does not see.
const (
	jitterDeg = 0.1
	lineError = 0.003
)

// bench is one invented machine of one double-acting throw.
type bench struct {
	name           string
	cyl            crank.Cylinder
	gas            gas.Fixed
	ps, ts         float64
	ratio, rpm     float64 // full load
	ratios, speeds [2]float64
	span, rate     float64 // Pa, of the pressure transmitters; samples per second
	single         bool    // the crank end does no work
}

var benches = []bench{
	{name: "gas 900", cyl: crank.Cylinder{Bore: .22, Stroke: .14, ConRod: .35, PistonRod: .055, Clearance: [2]float64{.16, .18}},
		gas: gas.Fixed{M: .0175, Zs: .96, Zd: .96, KV: 1.29, KT: 1.27}, ps: 20e5, ts: 303, ratio: 2.5, rpm: 900,
		ratios: [2]float64{1.8, 3.4}, speeds: [2]float64{600, 1000}, span: 100e5, rate: 51200},
	{name: "hydrogen 333", cyl: crank.Cylinder{Bore: .40, Stroke: .32, ConRod: .80, PistonRod: .09, Clearance: [2]float64{.14, .16}},
		gas: gas.Fixed{M: .0035, Zs: 1, Zd: 1, KV: 1.38, KT: 1.38}, ps: 15e5, ts: 313, ratio: 2.3, rpm: 333,
		ratios: [2]float64{1.7, 3}, speeds: [2]float64{260, 345}, span: 60e5, rate: 25600},
	{name: "air 1000", cyl: crank.Cylinder{Bore: .16, Stroke: .12, ConRod: .30, PistonRod: .045, Clearance: [2]float64{.10, .12}},
		gas: gas.Fixed{M: .02896, Zs: 1, Zd: 1, KV: 1.40, KT: 1.40}, ps: 4e5, ts: 298, ratio: 3.6, rpm: 1000,
		ratios: [2]float64{2.6, 4.4}, speeds: [2]float64{700, 1060}, span: 25e5, rate: 51200},
}

// Load steps.
const (
	full = iota
	pocket
	unloaded // crank end idle
	late     // both ends held open to 55°
	lateHE   // the head end alone
)

func (b *bench) skid() *skid.Skid {
	g := b.gas
	sk := &skid.Skid{ID: "bench", Rate: b.rate, Gas: skid.Gas{Name: "bench gas", Fixed: &g}}
	sk.Machine = skid.Machine{RatedRPM: b.rpm, MinRPM: b.rpm / 3, MaxRPM: b.rpm * 1.3, Atmosphere: 101325}
	sk.Phase = skid.Phase{Channel: "mark", MarksPerTurn: 1, AutoLevel: true}
	sk.Channels = []skid.Channel{{ID: "mark", Kind: skid.PhaseMark, VoltsFull: 10, Gain: 1, Min: -10, Max: 10}}
	sk.Process = skid.Process{Known: true, Stages: []skid.Line{{Ps: b.ps, Pd: b.ps * b.ratio, Ts: b.ts}}}
	sk.Steps = []skid.Step{{Code: full, Name: "full"}, {Code: pocket, Name: "pocket", Pocket: map[string]float64{"t1.he": .25}},
		{Code: unloaded, Name: "unloaded", Idle: map[string]bool{"t1.ce": true}},
		{Code: late, Name: "late", Late: map[string]float64{"t1.he": 55, "t1.ce": 55}},
		{Code: lateHE, Name: "late, head end", Late: map[string]float64{"t1.he": 55}}}
	th := skid.Throw{ID: "t1", Stage: 1, DeadCentre: 37, Cylinder: b.cyl}
	th.Cylinder.MassPiston, th.Cylinder.MassCrosshead = 60, 45
	for e, name := range []string{"he", "ce"} {
		if b.single && e == crank.CE {
			continue
		}
		end := "t1." + name
		th.Ends[e] = skid.End{Works: true, Pressure: "p." + end,
			Suction: []skid.Valve{{ID: end + ".s1"}, {ID: end + ".s2"}}, Discharge: []skid.Valve{{ID: end + ".d1"}, {ID: end + ".d2"}}}
		sk.Channels = append(sk.Channels, skid.Channel{ID: "p." + end, Kind: skid.Pressure, Input: len(sk.Channels), VoltsFull: 10,
			ZeroV: 1, Gain: b.span / 8, Min: 1e4, Max: b.span, Passage: 1500, PassageQ: 8})
	}
	sk.Throws = []skid.Throw{th}
	return sk
}

// trip is one run of a bench.
type trip struct {
	step    int
	seconds float64
	seed    uint64 // of what scatters; the machine and its transmitters stay the same
	changes []model.Change
	phase   float64 // degrees that the pressures are plotted too late
	gain    float64 // error of both pressure transducers, share
	ripple  float64 // amplitude of order 2; 0: the model's usual 0.003
}

// still stays at full load's ratio and speed for so many turns.
func (b *bench) still(seed uint64, step, turns int) trip {
	return trip{step: step, seconds: .6 + float64(turns)*60/b.rpm, seed: seed}
}

// swing moves ratio, speed and suction pressure inside the bench's region, and stays at each for about 75 turns.
func (b *bench) swing(seed uint64, step, stays int) trip {
	r := rand.New(rand.NewPCG(seed, 5))
	dwell := 75 * 60 / b.rpm
	v := trip{step: step, seconds: 2 + float64(stays)*dwell, seed: seed}
	for at := 2.0; at < v.seconds; at += dwell {
		ps := b.ps * (.93 + .14*r.Float64())
		v.changes = append(v.changes,
			model.Change{At: at, Over: 1, What: model.SuctionPressure, Where: "1", To: ps},
			model.Change{At: at, Over: 1.5, What: model.DischargePressure, Where: "1", To: ps * (b.ratios[0] + (b.ratios[1]-b.ratios[0])*r.Float64())},
			model.Change{At: at, Over: 1.5, What: model.Speed, To: b.speeds[0] + (b.speeds[1]-b.speeds[0])*r.Float64()})
	}
	return v
}

// line is a bench with what is learnt of it.
type line struct {
	*bench
	sk      *skid.Skid
	measure *measure.Measurer
	layout  measure.Layout
	learner *duty.Learner
	ref     *duty.Reference
}

func newLine(b *bench) *line {
	l := &line{bench: b, sk: b.skid()}
	m := measure.Throw{ID: "t1", Stage: 1}
	for e, end := range l.sk.Throws[0].Ends {
		m.Ends[e].Works = end.Works
		m.Ends[e].Blind = !end.Works
	}
	l.measure = measure.New(measure.Config{Machine: measure.Machine{Throws: []measure.Throw{m}}, Atmosphere: 101325})
	l.layout = l.measure.Layout()
	l.learner = duty.NewLearner(l.layout, duty.LearnConfig{})
	return l
}

func (l *line) turns(t testing.TB, v trip, use func(p duty.Point, x *measure.Vector), truth func(model.Truth)) {
	t.Helper()
	sk := l.sk
	par, err := model.Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	if v.ripple > 0 {
		par.Ripple = []skid.Ripple{{Order: 2, Amp: v.ripple, Phase: 70}}
	}
	m, err := model.New(sk, model.Script{RPM: l.rpm, Step: v.step, Changes: v.changes}, model.Options{Seed: 1, Rate: sk.Rate, Params: &par})
	if err != nil {
		t.Fatal(err)
	}
	asm, err := frame.New(frame.Config{Rate: sk.Rate, Inputs: len(sk.Channels), Channel: 0, Auto: true, MinRPM: 150, MaxRPM: 1400})
	if err != nil {
		t.Fatal(err)
	}
	tc := turn.ThrowConfig{DeadCentreDeg: sk.Throws[0].DeadCentre, Pressure: [2]turn.Channel{turn.None(), turn.None()}}
	works := [2]bool{}
	for e, end := range sk.Throws[0].Ends {
		if works[e] = end.Works; !end.Works {
			continue
		}
		c, _ := sk.ChannelByID(end.Pressure)
		gain, off := c.Scale(m.Info().Bits)
		tc.Pressure[e] = turn.Channel{ID: c.ID, Input: c.Input, Gain: gain, Offset: off, Min: c.Min, Max: c.Max, Passage: turn.Passage{Hz: c.Passage, Q: c.PassageQ}}
	}
	conv, err := turn.New(turn.Config{Rate: sk.Rate, Throws: []turn.ThrowConfig{tc}})
	if err != nil {
		t.Fatal(err)
	}
	rnd := rand.New(rand.NewPCG(v.seed, 77))
	tr := window.NewTracker(window.Config{Works: [][2]bool{works}})
	steps := []duty.Step{}
	for _, s := range sk.Steps {
		steps = append(steps, duty.Step{Code: s.Code, Idle: [2]bool{s.Idle["t1.he"], s.Idle["t1.ce"]}})
	}
	watch := duty.NewWatch(duty.WatchConfig{MinRPM: sk.Machine.MinRPM, MaxRPM: sk.Machine.MaxRPM, Steps: steps})
	var x measure.Vector
	emit := func(tn *turn.Turn) {
		if !tn.Valid() || tn.Time < .6 {
			return
		}
		th := &tn.Throws[0]
		jitter, s1, s2 := jitterDeg*rnd.NormFloat64(), lineError*rnd.NormFloat64(), lineError*rnd.NormFloat64()
		shift := v.phase + jitter
		for e := range th.P {
			th.P[e] = bent(th.P[e], shift/th.Grid.Step, 1+v.gain)
		}
		proc := m.Process(tn.Time)
		ln := proc.Stages[0]
		ln.Ps *= (1 + lineError) * (1 + s1)
		ln.Pd *= (1 - lineError) * (1 + s2)
		p, err := l.gas.Duty(ln.Ps, ln.Ts, ln.Pd)
		if err != nil {
			t.Fatal(err)
		}
		c := sk.CylinderAt(0, proc.Step)
		w := tr.Track(tn, []window.Input{{Cylinder: c, K: p.KV, LinePs: ln.Ps, LinePd: ln.Pd, IdleHint: steps[proc.Step].Idle}})
		l.measure.Measure(&x, tn, w, []measure.Input{{Cylinder: c, LinePs: ln.Ps, LinePd: ln.Pd, Ts: ln.Ts, Td: ln.Td,
			Gas: measure.Gas{R: p.R, Zs: p.Zs, Zd: p.Zd, KV: p.KV, KT: p.KT}}})
		in := duty.Input{Turn: tn.Number, Valid: true, RPM: tn.RPM, ProcessKnown: proc.Known, Step: proc.Step, Ps: ln.Ps, Pd: ln.Pd}
		for e, end := range w.Throws[0].Ends {
			in.OwnPs[e], in.OwnPd[e], in.Ends[e] = end.Ps, end.Pd, end.State
		}
		use(watch.Classify(in), &x)
	}
	var b acq.Block
	for m.Samples() < int64(v.seconds*sk.Rate) {
		m.Fill(&b, 2048)
		for _, tr := range m.Truths() {
			if truth != nil && tr.Rev > 5 {
				truth(tr)
			}
		}
		if err := asm.Add(&b, func(f *frame.Frame) { conv.Add(f, emit) }); err != nil {
			t.Fatal(err)
		}
	}
}

// bent is a pressure trace that a wrong phase shows by grid points later, and a wrong gain by a factor.
func bent(p []float64, by, gain float64) []float64 {
	if p == nil {
		return nil
	}
	out := make([]float64, len(p))
	for i := range p {
		x := float64(i) - by
		k := min(max(int(math.Floor(x))-1, 0), len(p)-4)
		u := x - float64(k) // cubic through four points
		q := p[k : k+4]
		out[i] = gain * (-q[0]*(u-1)*(u-2)*(u-3)/6 + q[1]*u*(u-2)*(u-3)/2 - q[2]*u*(u-1)*(u-3)/2 + q[3]*u*(u-1)*(u-2)/6)
	}
	return out
}

func (l *line) learn(t testing.TB, trips ...trip) {
	t.Helper()
	for _, v := range trips {
		l.turns(t, v, func(p duty.Point, x *measure.Vector) { l.learner.Add(0, p, x) }, nil)
	}
	b, err := l.learner.Fit(duty.Header{})
	if err != nil {
		t.Fatal(err)
	}
	if l.ref, err = b.Reference(l.layout); err != nil {
		t.Fatal(err)
	}
}

var paths = [5]string{"t1.he.suction", "t1.he.discharge", "t1.ce.suction", "t1.ce.discharge", "t1.rings"}

// reading is what one 32-turn block says of the five paths; NaN where it says nothing.
type reading struct {
	percent, spread [5]float64 // of leak_percent: the median's residual and its spread, per cent
	area            [5]float64 // mm²
	per             [5]float64 // mm² that are one per cent at this duty
	settled         bool
}

func (l *line) blocks(t testing.TB, v trip) (out []reading) {
	t.Helper()
	bl := duty.NewBlocks(l.ref, duty.BlockConfig{Turns: 32})
	var devs []duty.Deviation
	nan := math.NaN()
	l.turns(t, v, func(p duty.Point, x *measure.Vector) {
		devs = l.ref.Deviate(devs[:0], 0, p, x)
		blk, ok := bl.Add(0, p, x, devs)
		if !ok {
			return
		}
		r := reading{settled: blk.Settled}
		for j := range paths {
			r.percent[j], r.spread[j], r.area[j] = nan, nan, nan
			share, size := nan, nan
			ip, ia := l.layout.Find(paths[j], "leak_percent"), l.layout.Find(paths[j], "leak_area_mm2")
			for _, d := range blk.Dev {
				if d.Seen && d.Feature == ip {
					r.percent[j], r.spread[j], share = 100*d.Residual, 100*d.Spread, 100*d.Value
				}
				if d.Seen && d.Feature == ia {
					r.area[j], size = 1e6*d.Residual, 1e6*d.Value
				}
			}
			r.per[j] = size / share
		}
		out = append(out, r)
	}, nil)
	return out
}

// covers tells whether the interval that people are given, ±2√(spread² + (.03 A)² + (.2 %)²), holds the true area.
func (r reading) covers(j int, mm2 float64) bool {
	a := r.area[j]
	return math.Abs(a-mm2) <= 2*math.Sqrt(math.Pow(r.spread[j]*r.per[j], 2)+math.Pow(.03*a, 2)+math.Pow(.2*r.per[j], 2))
}

// open gives the change that opens a hole of so many mm² in a path from the start.
func open(path int, mm2 float64) model.Change {
	c := model.Change{What: model.ValveLeak, To: mm2 * model.MM2}
	switch path {
	case 4:
		c.What, c.Where = model.RingLeak, "t1"
	default:
		c.Where = [4]string{"t1.he.s1", "t1.he.d1", "t1.ce.s1", "t1.ce.d1"}[path]
	}
	return c
}

// unit is the hole in each path, mm², through which one per cent of the throughput is lost at full load. Measured on the
// line with one healthy run: the feature's own ratio of area to per cent, checked against the model's books by
// TestPercentIsTheModelsLoss.
func (l *line) unit(t testing.TB, turns int) (u [5]float64) {
	t.Helper()
	var a, p [5][]float64
	l.turns(t, l.still(3, full, turns), func(_ duty.Point, x *measure.Vector) {
		for j := range paths {
			ia, ip := l.layout.Find(paths[j], "leak_area_mm2"), l.layout.Find(paths[j], "leak_percent")
			if ia < 0 {
				continue
			}
			a[j], p[j] = append(a[j], 1e6*x.V[ia]), append(p[j], 100*x.V[ip])
		}
	}, nil)
	for j := range u {
		u[j] = middle(a[j]) / middle(p[j])
	}
	return u
}
