package station

import (
	"math"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/crank"
	"lapwing/internal/datum"
	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/passage"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// gathering collects what the estimates need.
type gathering struct {
	line   *Line
	sk     *skid.Skid
	rate   float64
	raw    [][]int32 // by input, the newest samples; nil where it is no pressure
	base   int64     // sample number of their first
	begun  bool
	throws []throwDuties
	u      float64 // degrees, the largest uncertainty of a turn's angles
	steady int64
}

// throwDuties is what one throw showed.
type throwDuties struct {
	duties  []dutyMean
	stretch [2][]passage.Stretch
	half    halfStretch
}

// dutyMean is the mean turn at one duty.
type dutyMean struct {
	step                          int
	ratio, rpm, ps                float64 // of its first turn
	mean                          datum.Mean
	sumPs, sumPd, sumTs, sumK, rz float64
	bend                          float64 // of the exponent along a stroke, summed
}

// halfStretch is the first of two turns that make a stretch.
type halfStretch struct {
	number int64
	from   int64
	opened [2][]float64 // sample positions
}

const (
	sameRatio = .02 // share within which turns are of one duty
	sameSpeed = .02
	sameLine  = .03
	mostTurns = 64 // of a duty; more say no more
	leastMean = 8  // turns of a duty that is used
	mostPairs = 48 // stretches of two turns for the passage
	keepRaw   = 12 // s of samples, far more than the turns lag behind
)

func newGathering(sk *skid.Skid, info acq.Info, proc processAt) (*gathering, error) {
	line, err := NewLine(sk, info, proc, LearnPlan{}, nil, alarm.New(AlarmTiming(sk)))
	if err != nil {
		return nil, err
	}
	g := &gathering{line: line, sk: sk, rate: info.Rate, raw: make([][]int32, info.Channels), throws: make([]throwDuties, len(sk.Throws))}
	for _, c := range sk.Channels {
		if c.Kind == skid.Pressure {
			g.raw[c.Input] = []int32{}
		}
	}
	return g, nil
}

func (g *gathering) add(b *acq.Block) error {
	if !g.begun || b.Lost > 0 {
		g.begun, g.base = true, b.Seq0
		for i := range g.raw {
			if g.raw[i] != nil {
				g.raw[i] = g.raw[i][:0]
			}
		}
	}
	keep := int(keepRaw * g.rate)
	for i := range g.raw {
		if g.raw[i] != nil {
			g.raw[i] = append(g.raw[i], b.Counts[i][:b.N]...)
		}
	}
	if n := int(b.Seq0+int64(b.N)-g.base) - 2*keep; n > 0 {
		for i := range g.raw {
			if g.raw[i] != nil {
				g.raw[i] = append(g.raw[i][:0], g.raw[i][keep:]...)
			}
		}
		g.base += int64(keep)
	}
	return g.line.walk(b, g.turn)
}

func (g *gathering) flush() {
	g.line.frames.Flush(func(f *frame.Frame) {
		g.line.turns.Add(f, func(t *turn.Turn) { g.line.walked(t, g.turn) })
	})
	g.line.turns.Flush(func(t *turn.Turn) { g.line.walked(t, g.turn) })
}

// turn takes the turns that are steady and whose working ends are all followed.
func (g *gathering) turn(t *turn.Turn, w window.Result) {
	for i := range g.throws {
		p := g.line.points[i]
		th := &g.throws[i]
		if p.State != duty.Steady || i >= len(t.Throws) || !g.followed(i, t, &w.Throws[i]) {
			th.half.number = -1
			continue
		}
		g.u = math.Max(g.u, t.Throws[i].U)
		g.steady++
		g.average(i, t, &w.Throws[i], p)
		g.cut(i, t, &w.Throws[i])
	}
}

func (g *gathering) followed(i int, t *turn.Turn, w *window.Throw) bool {
	any := false
	for e := range w.Ends {
		if t.Throws[i].P[e] == nil {
			continue
		}
		if t.Throws[i].Bad[e] != "" || w.Ends[e].State != window.Following && w.Ends[e].State != window.Idle {
			return false
		}
		any = any || w.Ends[e].State == window.Following
	}
	return any
}

// average adds a turn to the mean of its duty.
func (g *gathering) average(i int, t *turn.Turn, w *window.Throw, p duty.Point) {
	in := &g.line.mea[i]
	if !(p.Ps > 0 && p.Pd > p.Ps && in.Ts > 0 && in.Gas.R > 0) {
		return
	}
	rpm := t.Throws[i].RPM
	var m *dutyMean
	list := g.throws[i].duties
	for k := range list {
		d := &list[k]
		if d.step == p.Step && math.Abs(p.Pd/p.Ps/d.ratio-1) < sameRatio && math.Abs(rpm/d.rpm-1) < sameSpeed && math.Abs(p.Ps/d.ps-1) < sameLine {
			m = d
			break
		}
	}
	if m == nil {
		list = append(list, dutyMean{step: p.Step, ratio: p.Pd / p.Ps, rpm: rpm, ps: p.Ps})
		g.throws[i].duties = list
		m = &list[len(list)-1]
	}
	if m.mean.Turns() >= mostTurns {
		return
	}
	var closed [2][2]datum.Range
	for e := range closed {
		if w.Ends[e].State != window.Following {
			continue
		}
		for k, r := range w.Ends[e].Closed {
			if r.OK {
				closed[e][k] = datum.Range{From: r.I0, To: r.I1}
			}
		}
	}
	m.mean.Add(t.Throws[i].P, closed, t.Throws[i].Omega)
	if g, ok := g.line.gas.at(p.Ps, in.Ts, p.Pd); ok && g.T2s > in.Ts {
		m.bend += (g.KVd - g.KVs) / math.Log(g.T2s/in.Ts) // dense gas ends a stroke with another exponent than it begins with
	}
	m.sumPs, m.sumPd, m.sumTs, m.sumK = m.sumPs+p.Ps, m.sumPd+p.Pd, m.sumTs+in.Ts, m.sumK+in.Gas.KV
	m.rz += in.Gas.R * (in.Gas.Zs + in.Gas.Zd) / 2
}

// cut keeps the raw samples of two steady turns in a row.
func (g *gathering) cut(i int, t *turn.Turn, w *window.Throw) {
	th, tt := &g.throws[i], &t.Throws[i]
	var opened [2][]float64
	for e := range opened {
		for _, v := range []window.Event{window.SuctionOpens, window.DischargeOpens} {
			if a := w.Ends[e].W[v].Angle; w.Ends[e].State == window.Following && !math.IsNaN(a) {
				opened[e] = append(opened[e], tt.SampleAt(a))
			}
		}
	}
	if th.half.number != t.Number-1 || th.half.from < g.base {
		th.half = halfStretch{t.Number, int64(math.Floor(tt.T0)), opened}
		return
	}
	first := th.half
	th.half.number = -1
	to := int64(math.Floor(tt.T1))
	for e := range opened {
		ch, ok := g.sk.ChannelByID(g.sk.Throws[i].Ends[e].Pressure)
		if !ok || !g.sk.Throws[i].Ends[e].Works || w.Ends[e].State != window.Following || len(th.stretch[e]) >= mostPairs || to > g.base+int64(len(g.raw[ch.Input])) {
			continue
		}
		s := passage.Stretch{}
		for _, c := range g.raw[ch.Input][first.from-g.base : to-g.base] {
			s.X = append(s.X, float64(c))
		}
		for _, o := range append(first.opened[e], opened[e]...) {
			s.Opened = append(s.Opened, o-float64(first.from))
		}
		th.stretch[e] = append(th.stretch[e], s)
	}
}

// input makes the estimate's input of a throw's duties.
func (g *gathering) input(i int) *datum.Input {
	th := &g.sk.Throws[i]
	in := &datum.Input{Cylinder: th.Cylinder, Lo: -turn.PadDeg, Step: g.sk.Detection.GridDeg}
	if in.Step == 0 {
		in.Step = turn.DefaultStep
	}
	blind := !th.Ends[crank.HE].Works || !th.Ends[crank.CE].Works
	for k := range g.throws[i].duties {
		m := &g.throws[i].duties[k]
		n := float64(m.mean.Turns())
		if n < leastMean {
			continue
		}
		d := m.mean.Duty()
		d.Ps, d.Pd, d.Ts, d.K, d.RZ, d.KSlope = m.sumPs/n, m.sumPd/n, m.sumTs/n, m.sumK/n, m.rz/n, m.bend/n
		at := g.sk.CylinderAt(i, m.step)
		for e := range d.Pocket {
			d.Pocket[e] = at.Clearance[e] - th.Cylinder.Clearance[e]
		}
		in.Duties = append(in.Duties, d)
		if blind {
			in.Beyond = g.sk.Machine.Atmosphere
			if th.BlindAtSuction {
				in.Beyond = d.Ps
			}
		}
	}
	return in
}
