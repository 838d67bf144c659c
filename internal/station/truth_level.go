package station

import (
	"fmt"
	"math"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/sensor"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/wire"
)

// levels keeps pressure zeros true. The zero that the leak fit finds is followed as slowly as temperature moves it and
// taken off the pressures, so that no measure moves with it; what it has come to is told from half a per cent of the
// transducer's span on. A zero that jumps is not followed at that speed: it is the judge's to name. A sensitivity that
// is off against the other end on the same lines is named here.
type levels struct {
	throws []throwLevel
}

type throwLevel struct {
	level   *sensor.Level
	channel [2]int // index in the skid's channels, -1
	id      [2]string
	zero    [2]int // features
	low     [2]int // suction plateau
	high    [2]int // discharge plateau
	lags    [2][]int
	ps      float64
}

func newLevels(sk *skid.Skid, layout measure.Layout) *levels {
	l := &levels{throws: make([]throwLevel, len(sk.Throws))}
	for i := range l.throws {
		th := &l.throws[i]
		var span [2]float64
		for e := range th.channel {
			th.channel[e] = -1
			name := sk.EndName(i, e)
			for k, c := range sk.Channels {
				if end := &sk.Throws[i].Ends[e]; end.Works && c.ID == end.Pressure {
					th.channel[e], th.id[e] = k, c.ID
					if span[e] = c.Max - c.Min; !(span[e] > 0) {
						span[e] = math.Abs(c.VoltsFull * c.Gain)
					}
				}
			}
			th.zero[e], th.low[e], th.high[e] = layout.Find(name, "leak_zero_bar"), layout.Find(name, "p_suction_bar_abs"), layout.Find(name, "p_discharge_bar_abs")
			for k := range layout {
				if f := &layout[k]; f.Throw == i && f.End == e && (f.Name == "lag_ms" || f.Name == "onset_deg") {
					th.lags[e] = append(th.lags[e], k)
				}
			}
		}
		th.level, th.ps = sensor.NewLevel([2]float64{}, span), math.NaN()
	}
	return l
}

// anew begins against another baseline.
func (l *levels) anew() {
	for i := range l.throws {
		l.throws[i].level.Anew()
	}
}

// take sets what is taken off, as a baseline or a restart remembers it.
func (l *levels) take(list []duty.Zero) {
	for _, z := range list {
		for i := range l.throws {
			th := &l.throws[i]
			for e := range th.id {
				if th.id[e] == z.Channel {
					th.level.Set(e, z.Pa)
				}
			}
		}
	}
}

// off lists what is taken off.
func (l *levels) off() (out []duty.Zero) {
	for i := range l.throws {
		for e, id := range l.throws[i].id {
			if pa := l.throws[i].level.Offset(e); id != "" && pa != 0 {
				out = append(out, duty.Zero{Channel: id, Pa: pa})
			}
		}
	}
	return out
}

// correct takes the zeros off a turn's pressures.
func (l *levels) correct(t *turn.Turn) {
	for i := range t.Throws {
		for e := range 2 {
			if off := l.throws[i].level.Offset(e); off != 0 {
				p := t.Throws[i].P[e]
				for k := range p {
					p[k] -= off
				}
			}
		}
	}
}

// strip takes out when the impacts of an end came whose zero is far off: the angles that they are held against are bent.
func (l *levels) strip(v *measure.Vector) {
	for i := range l.throws {
		th := &l.throws[i]
		for e := range th.lags {
			if !th.level.Coarse(e, th.ps) {
				continue
			}
			for _, f := range th.lags[e] {
				if !math.IsNaN(v.V[f]) {
					v.V[f], v.Why[f] = math.NaN(), "the pressure zero of "+th.id[e]+" is in doubt, and with it the angles that impacts are held against"
				}
			}
		}
	}
}

// compare takes a throw's deviations from its baseline.
func (l *levels) compare(throw int, t *turn.Turn, at float64, p duty.Point, devs []duty.Deviation, s *sensors) {
	if p.State != duty.Steady {
		return
	}
	th := &l.throws[throw]
	nan := [2]float64{math.NaN(), math.NaN()}
	in := sensor.LevelTurn{Time: at, Zero: nan, Suction: nan, Discharge: nan, LinePs: p.Ps, LinePd: p.Pd}
	if p.Inferred {
		in.LinePs, in.LinePd = math.NaN(), math.NaN()
	}
	th.ps = p.Ps
	for i := range devs {
		d := &devs[i]
		if !d.Seen {
			continue
		}
		for e := range 2 {
			switch d.Feature {
			case th.zero[e]:
				in.Zero[e] = d.Residual
			case th.low[e]:
				in.Suction[e] = d.Residual
			case th.high[e]:
				in.Discharge[e] = d.Residual
			}
		}
	}
	for e, closed := range th.level.Add(&in) {
		if closed && th.channel[e] >= 0 {
			th.tell(e, t, s)
		}
	}
}

func (th *throwLevel) tell(e int, t *turn.Turn, s *sensors) {
	why := ""
	if th.level.Drifted(e) {
		why = fmt.Sprintf("%s: its zero has drifted by %+.2f bar since the baseline, which is taken off: usually the transducer's temperature; it wants to be zeroed or calibrated at the next stop", th.id[e], th.level.Offset(e)/1e5)
	}
	s.Tell(th.channel[e], sensor.Drift, t.Number, t.Seq0, why)
	g, doubt := th.level.Gain(e)
	if math.IsNaN(g) {
		return // nothing new; after a restart what stood goes on standing
	}
	if why = ""; doubt {
		why = fmt.Sprintf("%s reads %.1f %% too %s at both plateaus beside %s on the same lines, with its zero as it was: usually calibration, range setting or amplifier", th.id[e], 100*math.Abs(g), [2]string{"low", "high"}[btoi(g > 0)], th.beside(e))
	}
	s.Tell(th.channel[e], sensor.Sensitivity, t.Number, t.Seq0, why)
}

func (th *throwLevel) beside(e int) string {
	if o := th.id[1-e]; o != "" {
		return o
	}
	return "the line pressures"
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// remark puts a zero that is taken off beside the channels that are otherwise good.
func (l *levels) remark(out []wire.Channel) {
	for i := range l.throws {
		th := &l.throws[i]
		for e := range 2 {
			if th.channel[e] < 0 || math.Abs(th.level.Offset(e)) < leastRemark || out[th.channel[e]].State != sensor.Good.String() {
				continue
			}
			c := &out[th.channel[e]]
			if c.Reason != "" {
				c.Reason += "; "
			}
			c.Reason += fmt.Sprintf("%+.3f bar of zero drift since the baseline taken off", th.level.Offset(e)/1e5)
		}
	}
}

const leastRemark = 500 // Pa
