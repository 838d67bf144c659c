package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	source "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/verdict"
)

// The soak: long runs of the whole line on the modelled machine, healthy ones for false alarms, faulty ones for what is
// found and when. LAPWING_SOAK switches them on (`make soak`); a seed is a machine of its own.

// soakOnly skips a test unless this part of the soak was asked for.
func soakOnly(t *testing.T, part string) {
	if os.Getenv("LAPWING_SOAK") != part {
		t.Skipf("long: set LAPWING_SOAK=%s, or run make soak", part)
	}
}

// asInt reads a number from the environment.
func asInt(t testing.TB, name string, otherwise int) int {
	t.Helper()
	s := os.Getenv(name)
	if s == "" {
		return otherwise
	}
	n, err := strconv.Atoi(s)
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return n
}

// Load steps of the soaked machine: those of its skid file, and two with stepless suction control.
const (
	stepFull     = 0
	stepPockets  = 1
	stepHeadIdle = 2
	stepLateHead = 5
	stepLateBoth = 6
)

var soakSteps = []int{stepFull, stepPockets, stepHeadIdle, stepLateHead, stepLateBoth}

// soakSkid is the biomethane machine's first throw, or all of it, with late suction closing as load steps 5 and 6.
func soakSkid(t testing.TB) *skid.Skid {
	sk := fieldSkid(t)
	if asInt(t, "THROWS", 1) == 1 {
		sk = firstThrow(sk)
	}
	head, both := map[string]float64{}, map[string]float64{}
	for _, th := range sk.Throws {
		head[th.ID+".he"] = 60
		both[th.ID+".he"], both[th.ID+".ce"] = 55, 55
	}
	sk.Steps = append(sk.Steps, skid.Step{Code: stepLateHead, Name: "head ends late", Late: head}, skid.Step{Code: stepLateBoth, Name: "both ends late", Late: both})
	return sk
}

// soaked is a machine with what was learnt of it.
type soaked struct {
	sk     *skid.Skid
	seed   uint64
	base   *duty.Baseline
	memory Memory
	turns  int64 // of the learning walk
}

// play runs a script through the line; each hears of every turn and may end the run.
func (m *soaked) play(t testing.TB, told *skid.Skid, script model.Script, seconds float64, learn bool, each func(o *Output, l *Line) bool) *Line {
	t.Helper()
	src, err := source.Open(m.sk, script, source.Options{Seed: m.seed, Duration: time.Duration(seconds * float64(time.Second)),
		Start: time.Date(2026, 5, 4, 6, 0, 0, 0, time.UTC), BlockLen: 4096})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	if told == nil {
		told = m.sk
	}
	plan := LearnPlan{}
	if learn {
		plan.To = math.MaxInt64
	}
	rows := newHeld()
	var clock rowClock
	line, err := NewLine(told, src.Info(), rows.at, plan, m.base, alarm.New(AlarmTiming(told)))
	if err != nil {
		t.Fatal(err)
	}
	line.records = Heads
	if m.base != nil {
		if err := line.Remember(m.memory); err != nil {
			t.Fatal(err)
		}
	}
	go_on := true
	emit := func(o *Output) { go_on = each(o, line) && go_on }
	var b acq.Block
	for go_on {
		err := src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			line.Flush(emit)
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		src.Truths() // nobody wants them here
		for _, w := range clock.rows(&b, src.Info().Rate, src.Process) {
			rows.put(w)
		}
		if err := line.Add(&b, emit); err != nil {
			t.Fatal(err)
		}
	}
	return line
}

// walk strings duties together: each is reached by ramps of 10 % a second and held for so many turns.
func walkOf(s model.Script, at float64, hold float64, duties []fieldDuty) (model.Script, float64) {
	rpm := s.RPM
	for _, a := range duties {
		over := max(1, ramp(rpm, a.rpm))
		s, rpm = a.set(s, at, over), a.rpm
		at += over + hold*60/a.rpm
	}
	return s, at
}

// soakMachine makes a machine and learns it over the field in all its load steps.
func soakMachine(t testing.TB, seed uint64, steps ...int) *soaked {
	t.Helper()
	m := &soaked{sk: soakSkid(t), seed: seed}
	s, end := begin(m.sk, middle), 4.0
	for _, step := range steps {
		hold := 60.0
		if step == stepFull {
			hold = holdTurns
		}
		s, end = walkOf(s, end, hold, lesson(step))
	}
	for k, at := 0, 30.0; at < end; k, at = k+1, at+30 { // the gas is not always as cold
		s = s.Add(at, 20, model.SuctionTemp, "1", 293.15+6*float64(1-2*(k%2)))
	}
	line := m.play(t, nil, s, end, true, func(*Output, *Line) bool { return true })
	var o Output
	if line.endLearning(end, &o); o.LearnError != nil {
		t.Fatal(o.LearnError)
	}
	m.base, m.memory = o.Baseline, line.Memory()
	m.turns = line.Count().Turns
	return m
}

// roam is a random load schedule of so many turns: restless stretches, holds, load steps, starts and stops.
func roam(s model.Script, at float64, turns int, seed uint64, steps []int, stops bool) (model.Script, float64) {
	r := rand.New(rand.NewPCG(seed, 4711))
	in := func(lo, hi float64) float64 { return lo + (hi-lo)*r.Float64() }
	rpm, done := s.RPM, 0.0
	s.Drift = model.Drift{Ps: .01, Pd: .015, Speed: .01, Ts: 1, Period: 47}
	for k := 0; done < float64(turns); k++ {
		a := fieldDuty{ratio: in(1.8, 3.6), rpm: in(505, 995), ps: in(7.1, 8.9)}
		over := max(0.2, ramp(rpm, a.rpm))
		if k%2 == 1 {
			s = s.Add(at+in(0, over), 0, model.LoadStep, "", float64(steps[r.IntN(len(steps))]))
		}
		s = s.Add(at, in(0.5, 4), model.SuctionPressure, "1", a.ps*1e5).Add(at, in(0.5, 4), model.DischargePressure, "1", a.ps*a.ratio*1e5).
			Add(at, over, model.Speed, "", a.rpm).Add(at, 10, model.SuctionTemp, "1", 293.15+in(-7, 7))
		hold := max(over, 2) + in(3, 8)
		if r.Float64() < 0.5 {
			hold += in(5, 20)
		}
		done += (rpm + a.rpm) / 2 * over / 60
		done += a.rpm * (hold - over) / 60
		at, rpm = at+hold, a.rpm
		switch {
		case k%3 == 2: // the discharge swings by 8 % within seconds
			for n := range 4 {
				ratio := min(3.6, max(1.8, a.ratio*(1+0.08*float64(1-2*(n%2)))))
				s = s.Add(at, 1.5, model.DischargePressure, "1", ratio*a.ps*1e5)
				at, done = at+1.5, done+rpm*1.5/60
			}
		case stops && k%13 == 6: // coasts down, stands, starts again with equal pressures pulled apart
			s = s.Add(at, 5, model.Speed, "", 3).Add(at+5, 2, model.DischargePressure, "1", a.ps*1.3e5).
				Add(at+11, 6, model.Speed, "", rpm).Add(at+13, 5, model.DischargePressure, "1", a.ps*a.ratio*1e5)
			at, done = at+20, done+rpm*(2.5+3+3)/60
		}
	}
	return s, at
}

// said is one thing that was said for the first time, or more loudly.
type said struct {
	turn           int64
	at             float64
	key, grade, as string
}

func (s said) String() string {
	return fmt.Sprintf("turn %d, %.1f s: %s %s: %s", s.turn, s.at, s.key, s.grade, s.as)
}

// whyOf prints what stood behind a hypothesis in the newest block.
func whyOf(x *verdict.Explanation, subject, kind string) string {
	var b strings.Builder
	fmt.Fprintf(&b, "step %d, %.0f rpm, ratio %.2f, settled %v", x.Point.Step, x.Point.RPM, x.Point.Pd/x.Point.Ps, x.Settled)
	for _, c := range x.Cases {
		if c.Subject != subject || c.Kind != kind {
			continue
		}
		for _, v := range c.Classes {
			if !math.IsNaN(v.LLR) {
				fmt.Fprintf(&b, "\n  %v: %.1f, counts %.1f, middle %.1f, strong %d %s", v.Class, v.Raw, v.LLR, v.Median, v.Strong, v.Why)
			}
		}
		for _, e := range c.Evidence {
			fmt.Fprintf(&b, "\n    %v: %s (%.2f spreads, weight %.1f, %d turns)", e.Class, e.Text, e.Z, e.Weight, e.N)
		}
	}
	return b.String()
}
