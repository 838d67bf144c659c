package station

import (
	"math"
	"slices"
	"strings"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/sensor"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// sensorKind is the kind of every alarm on a channel itself; its key is <channel>/sensor.
const sensorKind = "sensor"

// sensors is the watch over the channels with its place in the machine.
type sensors struct {
	*sensor.Watch
	kinds    []skid.Kind
	place    []string // by channel: t1.he, t1; empty for the shaft reference
	keys     []string // by channel: of its alarm
	wells    []string // by channel: what its alarm says when nothing is wrong
	pressure [][2]int // by throw and end: index of the channel, -1
	accel    [][]int  // by throw
	stage    []int    // by throw
	both     [][]int  // by throw: features that rest on both of its ends

	// Of each throw: where a deviation goes in what is told of its first accelerometer, -1 nowhere.
	opening, noise   map[int]int
	openings, noises []int       // by throw: how many there are
	openLn, noiseLn  []float64   // scratch
	abroad           [][]float64 // scratch, suction and discharge plateaus of the other ends
	every            int64       // samples between two looks at the shaft reference
}

// referencePerSecond is how often the shaft reference is asked how it does.
const referencePerSecond = 4

func newSensors(sk *skid.Skid, info acq.Info, layout measure.Layout, do func(int, func(int))) (*sensors, error) {
	s := &sensors{opening: map[int]int{}, noise: map[int]int{}, every: max(1, int64(info.Rate/referencePerSecond)),
		abroad: make([][]float64, 2)}
	cfg := sensor.Config{Rate: info.Rate, Do: do}
	at := map[string]int{}
	for i, c := range sk.Channels {
		d := sensor.Channel{ID: c.ID, Input: c.Input, PerCount: c.VoltsFull / math.Exp2(float64(info.Bits-1)), FullV: c.VoltsFull, ZeroV: c.ZeroV,
			Gain: c.Gain, Min: c.Min, Max: c.Max, InnerDead: math.NaN()}
		switch c.Kind {
		case skid.Pressure:
			d.Kind = sensor.Pressure
		case skid.Acceleration:
			d.Kind = sensor.Acceleration
		}
		d.Teeth = c.Kind == skid.PhaseMark && sk.Phase.Index != "" && c.ID == sk.Phase.Channel
		at[c.ID] = i
		s.keys, s.wells = append(s.keys, c.ID+"/"+sensorKind), append(s.wells, c.ID+": nothing is wrong with the channel any more")
		s.kinds = append(s.kinds, c.Kind)
		cfg.Channels = append(cfg.Channels, d)
	}
	s.place = make([]string, len(sk.Channels))
	for i := range sk.Throws {
		t := &sk.Throws[i]
		p := [2]int{-1, -1}
		for e := range p {
			if k, ok := at[t.Ends[e].Pressure]; ok && t.Ends[e].Works {
				p[e] = k
				s.place[k] = sk.EndName(i, e)
				cfg.Channels[k].InnerDead = math.Mod(t.DeadCentre+180*float64(e), 360)
			}
		}
		var a []int
		for _, id := range t.Accel {
			a = append(a, at[id])
			s.place[at[id]] = strings.TrimPrefix(s.place[at[id]]+", "+t.ID, ", ") // one may serve two throws
		}
		s.pressure, s.accel, s.stage = append(s.pressure, p), append(s.accel, a), append(s.stage, t.Stage)
		open, hiss := 0, 0
		var both []int
		for k := range layout {
			if f := &layout[k]; f.Throw == i && (strings.HasPrefix(f.Name, "leak_") || f.End < 0 && f.Class == measure.Pressure) {
				both = append(both, k)
			}
			switch f := &layout[k]; {
			case f.Throw != i:
			case f.Name == "impact_norm_ln" && strings.HasSuffix(f.Subject, ".opens"):
				s.opening[k] = open
				open++
			case f.Name == "leak_noise_db":
				s.noise[k] = hiss
				hiss++
			}
		}
		s.both = append(s.both, both)
		s.openings, s.noises = append(s.openings, open), append(s.noises, hiss)
	}
	var err error
	s.Watch, err = sensor.New(cfg)
	return s, err
}

// withdraw marks what must not be used of a turn, so that windows, measures and evidence leave it out.
func (s *sensors) withdraw(t *turn.Turn) {
	for i := range t.Throws {
		th := &t.Throws[i]
		if len(th.Pos) == 0 {
			continue
		}
		lo, hi := int64(th.Pos[0]), int64(math.Ceil(th.Pos[len(th.Pos)-1]))+1
		for e, k := range s.pressure[i] {
			if k >= 0 && th.Bad[e] == "" {
				th.Bad[e] = s.Suspect(k, lo, hi)
			}
		}
		for j, k := range s.accel[i] {
			if j < len(th.Vib) && th.Vib[j].Suspect == "" {
				th.Vib[j].Suspect = s.Suspect(k, lo, hi)
			}
		}
	}
}

// strip takes out what rests on both ends of a throw where the channel of one is not used: leak areas fitted to one end
// alone are not those of the baseline, and the impacts of an end that is not followed sound like leaks.
func (s *sensors) strip(v *measure.Vector, t *turn.Turn) {
	for i := range t.Throws {
		for e, k := range s.pressure[i] {
			if k < 0 || t.Throws[i].Bad[e] == "" {
				continue
			}
			for _, f := range s.both[i] {
				if !math.IsNaN(v.V[f]) {
					v.V[f], v.Why[f] = math.NaN(), "needs both ends; "+s.ID(k)+" is not used"
				}
			}
			break
		}
	}
}

// compare tells the watch what only a baseline shows: a steady throw's deviations.
func (s *sensors) compare(throw int, t *turn.Turn, p duty.Point, devs []duty.Deviation) {
	if len(s.accel[throw]) == 0 || p.State != duty.Steady {
		return
	}
	s.openLn, s.noiseLn = absent(s.openLn, s.openings[throw]), absent(s.noiseLn, s.noises[throw])
	for i := range devs {
		d := &devs[i]
		if !d.Seen {
			continue
		}
		if k, ok := s.opening[d.Feature]; ok {
			s.openLn[k] = d.Residual
		} else if k, ok := s.noise[d.Feature]; ok {
			s.noiseLn[k] = d.Residual * math.Ln10 / 20
		}
	}
	s.Shift(s.accel[throw][0], t.Number, t.Seq0, s.openLn, s.noiseLn)
}

func absent(x []float64, n int) []float64 {
	x = x[:0]
	for range n {
		x = append(x, math.NaN())
	}
	return x
}

// level compares each end's plateaus with those of the other ends on the same lines. Two ends cannot tell which of
// them is wrong: it takes three.
func (s *sensors) level(t *turn.Turn, w window.Result) {
	for i := range w.Throws {
		for e, k := range s.pressure[i] {
			end := &w.Throws[i].Ends[e]
			if k < 0 || end.State != window.Following {
				continue
			}
			for g := range s.abroad {
				s.abroad[g] = s.abroad[g][:0]
			}
			for j := range w.Throws {
				for f := range w.Throws[j].Ends {
					o := &w.Throws[j].Ends[f]
					if (j != i || f != e) && s.stage[j] == s.stage[i] && o.State == window.Following && !math.IsNaN(o.Ps+o.Pd) {
						s.abroad[0], s.abroad[1] = append(s.abroad[0], o.Ps), append(s.abroad[1], o.Pd)
					}
				}
			}
			if len(s.abroad[0]) < 2 {
				continue
			}
			ps := halfway(s.abroad[0])
			s.Plateaus(k, t.Number, t.Seq0, (end.Ps-ps)/ps, (end.Pd-halfway(s.abroad[1]))/ps)
		}
	}
}

// halfway is the median of a short list, which it sorts.
func halfway(x []float64) float64 {
	slices.Sort(x)
	n := len(x)
	return (x[(n-1)/2] + x[n/2]) / 2
}

// conditions says to the alarms how every channel does. A gain or a zero is the judge's to raise.
func (s *sensors) conditions(conds []alarm.Condition, turn, seq1, reach int64) []alarm.Condition {
	for i := range s.Channels() {
		conds = s.condition(conds, i, turn, seq1, reach)
	}
	return conds
}

func (s *sensors) condition(conds []alarm.Condition, i int, turn, seq1, reach int64) []alarm.Condition {
	st := s.State(i)
	c := alarm.Condition{Key: s.keys[i], Subject: s.ID(i), Kind: sensorKind, Known: st.Category != sensor.FunctionCheck, Turn: turn,
		Seq0: max(0, st.First, seq1-reach), Seq1: seq1, Sentence: s.wells[i]}
	if st.Category > sensor.Good && !st.Judge {
		c.Sentence = st.Category.String() + ": " + st.Reason
		c.Severity = alarm.Advisory
		if st.Category == sensor.Failure {
			c.Severity = alarm.Alert
		}
	}
	return append(conds, c)
}

// health is every channel's state as it goes outside.
func (s *sensors) health() []wire.Channel {
	out := make([]wire.Channel, 0, s.Channels())
	for i := range s.Channels() {
		st := s.State(i)
		c := wire.Channel{ID: s.ID(i), Kind: string(s.kinds[i]), State: st.Category.String(), Reason: st.Reason}
		if st.Category > sensor.Good {
			c.Fault = st.Fault.String()
			c.SinceTurn = st.Since
		}
		c.Place = s.place[i]
		out = append(out, c)
	}
	return out
}
