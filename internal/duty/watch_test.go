package duty

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"lapwing/internal/window"
)

var nan = math.NaN()

func steadyInput(turn int64) Input {
	return Input{Turn: turn, Valid: true, RPM: 750, ProcessKnown: true, Step: 1, Ps: 20e5, Pd: 50e5,
		OwnPs: [2]float64{19.8e5, 19.7e5}, OwnPd: [2]float64{50.4e5, 50.3e5}, Ends: [2]window.State{window.Following, window.Following}}
}

// unload lets the crank end idle.
func unload(in *Input, yes bool) {
	if yes {
		in.Ends[1], in.OwnPs[1], in.OwnPd[1] = window.Idle, in.OwnPs[0], in.OwnPs[0]
	}
}

var stateLetter = map[State]byte{Unknown: '?', Stopped: 'O', Starting: 'S', Changing: 'C', Steady: '=', Unloaded: 'U', OutOfRange: 'R'}

// squeeze writes runs as letter and length.
func squeeze(s []byte) string {
	var b strings.Builder
	for i := 0; i < len(s); {
		j := i
		for j < len(s) && s[j] == s[i] {
			j++
		}
		b.WriteByte(s[i])
		if j-i > 1 {
			b.WriteString(strconv.Itoa(j - i))
		}
		i = j
	}
	return b.String()
}

func TestWatchScenarios(t *testing.T) {
	for name, c := range map[string]struct {
		turns int
		do    func(i int, in *Input)
		stop  map[int]bool
		want  string
	}{
		"a running machine warms up quickly":                                      {40, func(int, *Input) {}, nil, "S10=30"},
		"after a stop it starts slowly":                                           {120, func(int, *Input) {}, map[int]bool{20: true}, "S10=10OS60=39"},
		"a load step settles":                                                     {100, func(i int, in *Input) { in.Step = 1 + i/50; unload(in, i >= 50) }, nil, "S10=40C30=20"},
		"a load step told late is not judged":                                     {100, func(i int, in *Input) { in.Step = 1 + (i+42)/100; unload(in, i >= 50) }, nil, "S10=40?8C30=12"},
		"an end that is idle though the step says otherwise is judged in the end": {140, func(i int, in *Input) { unload(in, i >= 50) }, nil, "S10=40?60C10=20"},
		"traces that fit another pocket only":                                     {80, func(i int, in *Input) { in.OtherStep = i >= 30 && i < 36 }, nil, "S10=20?6C10=34"},
		"line pressure told late is taken from the plateaus that agree": {120, func(i int, in *Input) {
			if i >= 40 {
				in.OwnPd = [2]float64{56e5, 55.9e5}
			}
			if i >= 50 {
				in.Pd = 55.6e5
			}
		}, nil, "S10=30C37=43"},
		"one plateau that moves alone is not judged at first": {120, func(i int, in *Input) {
			if i >= 40 {
				in.OwnPd[0] = 56e5
			}
		}, nil, "S10=30?19C10=51"},
		"nor is one of a throw with one end at work": {120, func(i int, in *Input) {
			in.Step = 2
			unload(in, true)
			if i >= 40 {
				in.OwnPd[0] = 56e5
			}
		}, nil, "S10=30?19C10=51"},
		"pressures that were never told are not judged once they stand": {120, func(i int, in *Input) {
			if i >= 40 {
				in.OwnPd = [2]float64{56e5, 55.9e5}
			}
		}, nil, "S10=30C18?19C10=33"},
		"an invalid turn is unknown and no more": {40, func(i int, in *Input) { in.Valid = i != 20 }, nil, "S10=10?=19"},
		"speed outside its range": {100, func(i int, in *Input) {
			if i >= 20 && i < 30 {
				in.RPM = 300
			}
		}, nil, "S10=10R10C30=40"},
		"a slow run up to speed is starting": {130, func(i int, in *Input) {
			if i > 20 {
				in.RPM = math.Min(750, 300+5*float64(i-20))
			}
		}, map[int]bool{20: true}, "S10=10OS99C10"}, // 39 turns below 500 rpm, then 60
		"both ends held open": {100, func(i int, in *Input) {
			if in.Step = 1; i >= 40 && i < 60 {
				in.Step = 3
				in.Ends = [2]window.State{window.Idle, window.Idle}
				in.OwnPd = in.OwnPs
			}
		}, nil, "S10=30U20C30=10"},
		"both ends held open, process values lost": {100, func(i int, in *Input) {
			if in.ProcessKnown = false; i >= 40 && i < 60 {
				in.Ends = [2]window.State{window.Idle, window.Idle}
				in.OwnPd = in.OwnPs
			}
		}, nil, "S10=30U20C30=10"},
		"slow ramp is steady": {200, func(i int, in *Input) { in.Pd = 50e5 * (1 + 0.0004*float64(i)) }, nil, "S10=190"},
		"fast ramp is changing": {100, func(i int, in *Input) {
			if i >= 40 {
				in.Pd = 50e5 * (1 + 0.004*float64(i-40))
				in.OwnPd = [2]float64{1.008 * in.Pd, 1.006 * in.Pd}
			}
		}, nil, "S10=33C57"},
		"no pressures anywhere": {30, func(i int, in *Input) {
			in.Ps, in.Pd, in.OwnPs, in.OwnPd = nan, nan, [2]float64{nan, nan}, [2]float64{nan, nan}
		}, nil, "S10?20"},
		"a lasting hole begins anew": {40, func(i int, in *Input) {
			if i >= 20 {
				in.Turn += 500
			}
		}, nil, "S10=10S10=10"},
		"lost process values change nothing by themselves": {60, func(i int, in *Input) { in.ProcessKnown = i < 30 }, nil, "S10=50"},
	} {
		t.Run(name, func(t *testing.T) {
			w := NewWatch(WatchConfig{MinRPM: 500, MaxRPM: 1000, Steps: []Step{{Code: 1}, {Code: 2, Idle: [2]bool{false, true}}, {Code: 3, Idle: [2]bool{true, true}}}})
			var got []byte
			for i := range c.turns {
				if c.stop[i] {
					got = append(got, stateLetter[w.Stopped().State])
					continue
				}
				in := steadyInput(int64(i))
				c.do(i, &in)
				got = append(got, stateLetter[w.Classify(in).State])
			}
			if name == "fast ramp is changing" { // where it begins depends on the filter; that it begins within 10 turns and lasts is the point
				k := strings.IndexByte(string(got[10:]), 'C') + 10
				if k < 40 || k > 50 || strings.ContainsAny(string(got[k:]), "=?SO") {
					t.Errorf("got %s", squeeze(got))
				}
				return
			}
			if s := squeeze(got); s != c.want {
				t.Errorf("got %s, want %s", s, c.want)
			}
		})
	}
}

func TestStepIsInferredFromIdleEnds(t *testing.T) {
	w := NewWatch(WatchConfig{Steps: []Step{{Code: 3}, {Code: 7, Idle: [2]bool{false, true}}}})
	in := steadyInput(0)
	in.ProcessKnown = false
	if p := w.Classify(in); p.Step != 3 || !p.Inferred || p.Ps != 19.8e5 {
		t.Errorf("both ends work: %+v", p)
	}
	in.Turn, in.Ends[1] = 1, window.Idle
	if p := w.Classify(in); p.Step != 7 {
		t.Errorf("crank end idle: step %d, want 7", p.Step)
	}
	in.Turn, in.Ends[1] = 2, window.Lost // says nothing: stays
	if p := w.Classify(in); p.Step != 7 {
		t.Errorf("lost window: step %d, want 7", p.Step)
	}
	in.Turn, in.Ends[0], in.Ends[1] = 3, window.Idle, window.Following
	if p := w.Classify(in); p.Step >= 0 || p.Ps != 19.7e5 {
		t.Errorf("a pattern no step has: step %d, Ps %g", p.Step, p.Ps)
	}
	in.Turn, in.ProcessKnown, in.Step = 4, true, 3
	if p := w.Classify(in); p.Step != 3 || p.Inferred || p.OwnStep >= 0 {
		t.Errorf("with process values: %+v", p)
	}
}

// Process values a second late: within what the plateaus can make good they do, and a share of valve loss that is
// another at another flow is taken for what it is once the pressures told have stood still.
func TestPlateausMakeGoodTheDelay(t *testing.T) {
	w := NewWatch(WatchConfig{MinRPM: 500, MaxRPM: 1000, Steps: []Step{{Code: 1}}})
	unknown := 0
	for i := range 120 {
		in := steadyInput(int64(i))
		truth := 50e5 * math.Exp(0.002*float64(min(max(i-30, 0), 30))) // 0.2 % a turn, 6 % in all
		in.OwnPd = [2]float64{1.008 * truth, 1.006 * truth}
		in.Pd = 50e5 * math.Exp(0.002*float64(min(max((i-30)/12*12, 0), 30))) // once a second
		if i >= 80 {                                                          // another flow
			in.OwnPs = [2]float64{19.0e5, 18.9e5}
		}
		p := w.Classify(in)
		if p.State == Unknown {
			unknown++
			if i < 80 && i > 60 {
				t.Errorf("turn %d is not judged", i)
			}
			continue
		}
		if e := math.Log(p.Pd / truth); math.Abs(e) > 0.02 {
			t.Errorf("turn %d: discharge pressure %.1f %% wrong", i, 100*e)
		}
		if i >= 80+19 && p.Ps != 20e5 {
			t.Errorf("turn %d: suction pressure %g", i, p.Ps)
		}
	}
	// 1.5 s of turns at 750 rpm are 19.
	if unknown < 19 || unknown > 40 {
		t.Errorf("%d turns were not judged", unknown)
	}
}
