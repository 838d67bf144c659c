// Package windowtest runs a modelled machine through the line as far as the turn, for tests of what comes after it.
//
// It needs: a Run. It waits: for the whole run. It emits: each turn with the process values and the truth of it.
// When it cannot: the test fails.
package windowtest

import (
	"fmt"
	"math"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/frame"
	"lapwing/internal/gas"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// Load steps of the bench machine.
const (
	Full = iota
	Pocket
	Unloaded // crank end held open
	Late     // both ends held open to 55°
)

// Run is one run of the bench machine: one double-acting throw of an invented natural-gas compressor, 20 bar suction.
type Run struct {
	Ratio, RPM float64
	Step       int
	Seconds    float64
	Seed       uint64
	Throws     int                 // 0: one
	Changes    []model.Change      // on top
	Params     func(*model.Params) // changes to the physics; nil: none
	Machine    func(*skid.Skid)    // changes to the machine; nil: none
	Told       Told
}

// Told is what the line is told of the machine beside the truth.
type Told struct {
	U         float64 // degrees, 95 % half-width of angles: the shaft's ripple is then known; 0: it is not
	LateDeg   float64 // dead centres are told this much too late
	PassageHz float64 // factor on the resonance of every gauge passage; 0: as it is
	PassageQ  float64 // likewise on its damping
}

// Turn is one valid turn of a run.
type Turn struct {
	*turn.Turn
	Process skid.Process
	Truth   [][2]model.Truth // by throw and end; Rev -1 where the truth was not to be had
}

// Gas is what the bench compresses.
func Gas() gas.Fixed { return gas.Fixed{M: .0175, Zs: .96, Zd: .96, KV: 1.29, KT: 1.27} }

// Skid is the machine.
func (r Run) Skid() *skid.Skid {
	g := Gas()
	sk := &skid.Skid{ID: "bench", Rate: 51200, Gas: skid.Gas{Name: "bench gas", Fixed: &g}}
	sk.Machine = skid.Machine{RatedRPM: 900, MinRPM: min(300, r.RPM), MaxRPM: max(1200, r.RPM), Atmosphere: 101325}
	sk.Phase = skid.Phase{Channel: "mark", MarksPerTurn: 1, AutoLevel: true}
	sk.Channels = []skid.Channel{{ID: "mark", Kind: skid.PhaseMark, VoltsFull: 10, Gain: 1, Min: -10, Max: 10}}
	sk.Process = skid.Process{Known: true, Stages: []skid.Line{{Ps: 20e5, Pd: 20e5 * r.Ratio, Ts: 303}}}
	sk.Steps = []skid.Step{{Code: Full, Name: "full"}, {Code: Pocket, Name: "pocket", Pocket: map[string]float64{}},
		{Code: Unloaded, Name: "unloaded", Idle: map[string]bool{}}, {Code: Late, Name: "late", Late: map[string]float64{}}}
	in := 1
	add := func(c skid.Channel) {
		c.Input = in
		sk.Channels = append(sk.Channels, c)
		in++
	}
	for i := range max(r.Throws, 1) {
		th := skid.Throw{ID: fmt.Sprintf("t%d", i+1), Stage: 1, DeadCentre: 37 + 90*float64(i), Cylinder: crank.Cylinder{
			Bore: .22, Stroke: .14, ConRod: .35, PistonRod: .055, Clearance: [2]float64{.16, .18}, MassPiston: 60, MassCrosshead: 45}}
		sk.Steps[Pocket].Pocket[th.ID+".he"] = .25
		sk.Steps[Unloaded].Idle[th.ID+".ce"] = true
		sk.Steps[Late].Late[th.ID+".he"], sk.Steps[Late].Late[th.ID+".ce"] = 55, 55
		for e, name := range []string{"he", "ce"} {
			end := th.ID + "." + name
			th.Ends[e] = skid.End{Works: true, Pressure: "p." + end}
			for n := 1; n <= 2; n++ {
				s, d := fmt.Sprintf("%s.s%d", end, n), fmt.Sprintf("%s.d%d", end, n)
				th.Ends[e].Suction = append(th.Ends[e].Suction, skid.Valve{ID: s, Cover: "c." + s})
				th.Ends[e].Discharge = append(th.Ends[e].Discharge, skid.Valve{ID: d, Cover: "c." + d})
			}
			add(skid.Channel{ID: "p." + end, Kind: skid.Pressure, VoltsFull: 10, ZeroV: 1, Gain: 160e5 / 8, Min: 1e4, Max: 160e5,
				Passage: 1500, PassageQ: 8})
		}
		th.Accel = []string{"a." + th.ID}
		add(skid.Channel{ID: "a." + th.ID, Kind: skid.Acceleration, VoltsFull: 10, Gain: 98.0665, Min: -490, Max: 490})
		sk.Throws = append(sk.Throws, th)
	}
	if r.Machine != nil {
		r.Machine(sk)
	}
	return sk
}

// Turns runs it and hands every valid turn on, the first settle seconds left out. Turns are valid during use only.
func (r Run) Turns(t testing.TB, settle float64, use func(Turn)) {
	t.Helper()
	sk := r.Skid()
	script := model.Script{RPM: r.RPM, Step: r.Step, Changes: r.Changes}
	par, err := model.Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	if r.Params != nil {
		r.Params(&par)
	}
	m, err := model.New(sk, script, model.Options{Seed: r.Seed, Rate: sk.Rate, Params: &par})
	if err != nil {
		t.Fatal(err)
	}
	least, most := r.RPM, r.RPM
	for _, c := range r.Changes {
		if c.What == model.Speed {
			least, most = min(least, c.To), max(most, c.To)
		}
	}
	fc := frame.Config{Rate: sk.Rate, Inputs: len(sk.Channels), Channel: 0, Auto: sk.Phase.AutoLevel, MinRPM: min(200, least/2), MaxRPM: max(1300, 1.2*most)}
	if sk.Phase.Falling {
		fc.Edge = frame.Falling
	}
	if mark, ok := sk.ChannelByID(sk.Phase.Channel); ok {
		fc.Channel, fc.Threshold = mark.Input, sk.Phase.Threshold/(mark.VoltsFull/float64(int64(1)<<(m.Info().Bits-1)))
	}
	asm, err := frame.New(fc)
	if err != nil {
		t.Fatal(err)
	}
	tc := converterOf(sk, m.Info().Bits)
	r.Told.tell(&tc, par.Ripple)
	conv, err := turn.New(tc)
	if err != nil {
		t.Fatal(err)
	}
	var truths []model.Truth
	emit := func(tn *turn.Turn) {
		if !tn.Valid() || tn.Time < settle {
			return
		}
		out := Turn{Turn: tn, Process: m.Process(tn.Time), Truth: make([][2]model.Truth, len(sk.Throws))}
		for i := range tn.Throws {
			t0 := tn.Throws[i].T0 / sk.Rate
			for e := range out.Truth[i] {
				out.Truth[i][e].Rev = -1
				for _, tr := range truths {
					if tr.Throw == i && tr.End == e && math.Abs(tr.T0-t0) < 5/r.RPM {
						out.Truth[i][e] = tr
					}
				}
			}
		}
		use(out)
	}
	var b acq.Block
	const n = 2048
	for m.Samples() < int64(r.Seconds*sk.Rate) {
		m.Fill(&b, n)
		truths = append(truths, m.Truths()...)
		if len(truths) > 64 {
			truths = append(truths[:0], truths[len(truths)-48:]...)
		}
		if err := asm.Add(&b, func(f *frame.Frame) { conv.Add(f, emit) }); err != nil {
			t.Fatal(err)
		}
	}
}

// tell puts what is told in the turn stage's configuration.
func (k Told) tell(c *turn.Config, ripple []skid.Ripple) {
	if k.U > 0 {
		c.Marks.U = k.U
		for _, r := range ripple {
			c.Marks.Ripple = append(c.Marks.Ripple, turn.Ripple{Order: r.Order, Amp: r.Amp, PhaseDeg: r.Phase})
		}
	}
	factor := func(f float64) float64 {
		if f == 0 {
			return 1
		}
		return f
	}
	for i := range c.Throws {
		th := &c.Throws[i]
		th.DeadCentreDeg = math.Mod(th.DeadCentreDeg+k.LateDeg+360, 360)
		for e := range th.Pressure {
			p := &th.Pressure[e].Passage
			p.Hz, p.Q = p.Hz*factor(k.PassageHz), p.Q*factor(k.PassageQ)
		}
	}
}

// converterOf tells the turn stage what the skid says.
func converterOf(sk *skid.Skid, bits int) turn.Config {
	channel := func(id string) turn.Channel {
		c, ok := sk.ChannelByID(id)
		if !ok {
			return turn.None()
		}
		gain, offset := c.Scale(bits)
		return turn.Channel{ID: id, Input: c.Input, Gain: gain, Offset: offset, Min: c.Min, Max: c.Max,
			Passage: turn.Passage{Hz: c.Passage, Q: c.PassageQ}}
	}
	cfg := turn.Config{Rate: sk.Rate}
	for _, th := range sk.Throws {
		tc := turn.ThrowConfig{DeadCentreDeg: th.DeadCentre}
		for e := range th.Ends {
			tc.Pressure[e] = channel(th.Ends[e].Pressure)
		}
		for _, a := range th.Accel {
			tc.Accel = append(tc.Accel, channel(a))
		}
		cfg.Throws = append(cfg.Throws, tc)
	}
	return cfg
}
