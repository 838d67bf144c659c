package station

import (
	"context"
	"errors"
	"io"
	"math"
	"slices"
	"sort"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	source "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/verdict"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// fieldSkid loads the machine that is modelled.
func fieldSkid(t testing.TB) *skid.Skid {
	t.Helper()
	const name = "biomethane-two-throw.yaml"
	raw, err := configs.Files.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse(name, raw)
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

// fieldDuty is a duty of the machine.
type fieldDuty struct {
	ratio, rpm, ps float64 // ps in bar absolute
	step           int
}

func (a fieldDuty) set(s model.Script, at, over float64) model.Script {
	s = s.Add(at, over, model.SuctionPressure, "1", a.ps*1e5).Add(at, over, model.DischargePressure, "1", a.ps*a.ratio*1e5).
		Add(at, over, model.Speed, "", a.rpm)
	return s.Add(at, 0, model.LoadStep, "", float64(a.step))
}

// ramp is how long a change of speed takes at 10 % a second.
func ramp(from, to float64) float64 { return 10 * math.Abs(to-from) / from }

// begin is a script that starts at a duty.
func begin(sk *skid.Skid, a fieldDuty) model.Script {
	l := sk.Process.Stages[0]
	l.Ps, l.Pd = a.ps*1e5, a.ps*a.ratio*1e5
	return model.Script{Lines: []skid.Line{l}, RPM: a.rpm, Step: a.step}
}

// trial is one run of the line on the modelled machine.
type trial struct {
	machine, told *skid.Skid // as it is, and as the skid file says; told nil: the same
	seed          uint64
	script        model.Script
	seconds       float64
	teach         bool // learn from the whole run
	steady        int  // or from the first so many steady turns, and judge the rest
	base          *duty.Baseline
	memory        *window.Memory
}

// seen is one throw of one turn as the line saw it.
type seen struct {
	throw   int
	t0, rpm float64
	duty    string
	step    int
	ends    [2]seenEnd
}

type seenEnd struct {
	there bool
	state string
	w     [window.Events]seenWindow
}

type seenWindow struct {
	lo, hi, angle float64
	state         string
	shared        bool
	why           string
}

// heard is what the line said, and when.
type heard struct {
	at                  float64
	key                 string
	grade               verdict.Grade
	state               string // of the alarm; empty for a finding
	said                string
	pressure, vibration bool // evidence for it
}

// outcome is a finished trial.
type outcome struct {
	trial
	turns, invalid int
	rows           []seen
	truths         []model.Truth
	findings       []heard // each change of grade of each finding
	alarms         []heard // each transition
	duties         map[string]int
	unseen         map[string]int
	reasons        map[string]int64
	blocks         int64
	took           time.Duration
	learnt         *duty.Baseline
	learnError     error
	windows        window.Memory
}

func (tr trial) run(t testing.TB) *outcome {
	t.Helper()
	start := time.Now()
	out := &outcome{trial: tr, duties: map[string]int{}, unseen: map[string]int{}}
	told := tr.told
	if told == nil {
		told = tr.machine
	}
	src, err := source.Open(tr.machine, tr.script, source.Options{Seed: tr.seed, Duration: time.Duration(tr.seconds * float64(time.Second)),
		Start: time.Date(2026, 5, 4, 6, 0, 0, 0, time.UTC), BlockLen: 4096})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	plan := LearnPlan{Steady: tr.steady}
	if tr.teach {
		plan.To = math.MaxInt64
	}
	rows := newHeld()
	var clock rowClock
	line, err := NewLine(told, src.Info(), rows.at, plan, tr.base, alarm.New(AlarmTiming(told)))
	if err != nil {
		t.Fatal(err)
	}
	if tr.memory != nil {
		if err := line.Remember(Memory{Windows: *tr.memory}); err != nil {
			t.Fatal(err)
		}
	}
	grades := map[string]verdict.Grade{}
	emit := func(o *Output) { out.take(o, line, grades) }
	var b acq.Block
	for {
		err := src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		for _, w := range clock.rows(&b, src.Info().Rate, src.Process) {
			rows.put(w)
		}
		if err := line.Add(&b, emit); err != nil {
			t.Fatal(err)
		}
		out.truths = append(out.truths, src.Truths()...)
	}
	line.Flush(emit)
	if out.learnError != nil {
		t.Fatal(out.learnError)
	}
	if tr.teach {
		var o Output
		if line.endLearning(tr.seconds, &o); o.LearnError != nil {
			t.Fatal(o.LearnError)
		}
		out.learnt = o.Baseline
	}
	out.windows = line.Memory().Windows
	out.blocks, out.reasons = line.Count().Blocks, line.Count().Reasons
	out.took = time.Since(start)
	return out
}

func (out *outcome) take(o *Output, line *Line, grades map[string]verdict.Grade) {
	out.turns++
	if !o.Record.Valid {
		out.invalid++
		return
	}
	for i := range o.Record.Throws {
		th := &o.Record.Throws[i]
		out.duties[th.Duty]++
		if line.ref != nil {
			if ok, why := line.ref.Seen(i, o.Points[i]); !ok {
				out.unseen[why]++
			}
		}
		row := seen{throw: i, t0: *th.TimeS, rpm: *th.RPM, duty: th.Duty, step: th.Step}
		for _, e := range th.Ends {
			end := &row.ends[slices.Index(wire.EndNames[:], e.End)]
			end.there, end.state = true, e.State
			for k, ev := range e.Events {
				w := seenWindow{lo: math.NaN(), hi: math.NaN(), angle: math.NaN(), state: ev.State, shared: ev.Shared, why: ev.Why}
				if ev.Window != nil {
					w.lo, w.hi = ev.Window[0], ev.Window[1]
				}
				if ev.Angle != nil {
					w.angle = *ev.Angle
				}
				end.w[k] = w
			}
		}
		out.rows = append(out.rows, row)
	}
	if o.LearnError != nil {
		out.learnError = o.LearnError
	}
	if o.Baseline != nil {
		out.learnt = o.Baseline
	}
	for _, f := range o.News {
		key := f.Subject + "/" + f.Kind
		if grades[key] == f.Grade {
			continue
		}
		grades[key] = f.Grade
		h := heard{at: o.Record.TimeS, key: key, grade: f.Grade, said: f.Sentence}
		for _, e := range f.Evidence {
			h.pressure = h.pressure || e.Class == measure.Pressure && e.LLR > 0
			h.vibration = h.vibration || e.Class == measure.Vibration && e.LLR > 0
		}
		out.findings = append(out.findings, h)
	}
	for _, tr := range o.Transitions {
		h := heard{at: o.Record.TimeS, key: tr.Key, state: tr.To.String(), said: tr.Sentence}
		for _, g := range []verdict.Grade{verdict.Advisory, verdict.Alert, verdict.Danger} {
			if severity(g) == tr.Severity {
				h.grade = g
			}
		}
		out.alarms = append(out.alarms, h)
	}
}

// tally counts one kind of event of the judged turns.
type tally struct {
	n, in, liftIn, found, shared, noWindow int
	errs, width                            []float64
}

// miss is an event outside its window.
type miss struct {
	at           float64
	throw, end   int
	event        window.Event
	step         int
	rpm          float64
	impact, lift float64
	w            seenWindow
}

type score struct {
	ev     [window.Events]tally
	misses []miss
	states map[string]int
}

// score holds the windows against the truth for turns that begin in [from, to) seconds.
func (out *outcome) score(from, to float64) *score {
	books := map[[2]int][]model.Truth{}
	for _, tr := range out.truths {
		k := [2]int{tr.Throw, tr.End}
		books[k] = append(books[k], tr)
	}
	s := &score{states: map[string]int{}}
	for r := range out.rows {
		row := &out.rows[r]
		if row.t0 < from || row.t0 >= to {
			continue
		}
		for e := range row.ends {
			if !row.ends[e].there {
				continue
			}
			book := books[[2]int{row.throw, e}]
			k := sort.Search(len(book), func(i int) bool { return book[i].T0 > row.t0-6/row.rpm })
			if k == len(book) || math.Abs(book[k].T0-row.t0) > 6/row.rpm || k == 0 {
				continue
			}
			s.states[row.ends[e].state]++
			now, before := &book[k], &book[k-1]
			events := [window.Events]model.Event{window.SuctionOpens: now.Suction.Open, window.DischargeOpens: now.Discharge.Open}
			if e == crank.HE {
				events[window.SuctionCloses], events[window.DischargeCloses] = now.Suction.Close, turnEarlier(before.Discharge.Close)
			} else {
				events[window.SuctionCloses], events[window.DischargeCloses] = turnEarlier(before.Suction.Close), now.Discharge.Close
			}
			for ev := range events {
				if !math.IsNaN(events[ev].Impact) {
					s.add(row, e, window.Event(ev), events[ev])
				}
			}
		}
	}
	return s
}

// turnEarlier puts a closing of the turn before on this turn's angles.
func turnEarlier(e model.Event) model.Event {
	e.Lift -= 360
	e.Impact -= 360
	return e
}

func (s *score) add(row *seen, e int, ev window.Event, truth model.Event) {
	w, c := &row.ends[e].w[ev], &s.ev[ev]
	c.n++
	if math.IsNaN(w.lo) {
		c.noWindow++
	} else {
		c.width = append(c.width, w.hi-w.lo)
		if w.shared {
			c.shared++
		}
	}
	if !math.IsNaN(w.angle) {
		c.found++
		c.errs = append(c.errs, w.angle-truth.Lift)
	}
	if truth.Lift >= w.lo && truth.Lift <= w.hi {
		c.liftIn++
	}
	if truth.Impact >= w.lo && truth.Impact <= w.hi {
		c.in++
	} else {
		s.misses = append(s.misses, miss{row.t0, row.throw, e, ev, row.step, row.rpm, truth.Impact, truth.Lift, *w})
	}
}

func quantileOf(x []float64, q float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	y := slices.Clone(x)
	slices.Sort(y)
	return y[int(math.Round(q*float64(len(y)-1)))]
}

func absolute(x []float64) []float64 {
	y := make([]float64, len(x))
	for i := range x {
		y[i] = math.Abs(x[i])
	}
	return y
}

func (s *score) print(t testing.TB) {
	t.Logf("%-17s %6s %8s %8s %8s %7s %7s %7s %7s %7s", "event", "n", "impact%", "lift%", "none%", "err50", "|e|50", "|e|95", "width", "shared%")
	for ev := range s.ev {
		c := &s.ev[ev]
		pc := func(n int) float64 { return 100 * float64(n) / float64(max(c.n, 1)) }
		a := absolute(c.errs)
		t.Logf("%-17s %6d %8.2f %8.2f %8.2f %+7.2f %7.2f %7.2f %7.1f %7.1f", wire.EventNames[ev], c.n, pc(c.in), pc(c.liftIn), pc(c.noWindow),
			quantileOf(c.errs, .5), quantileOf(a, .5), quantileOf(a, .95), quantileOf(c.width, .5), pc(c.shared))
	}
	t.Logf("states %v", s.states)
}

func (out *outcome) print(t testing.TB) {
	t.Logf("%.0f s of signal in %.1f s (%.1f times real time), %d turns, %d invalid %v, %d blocks, duties %v, not learnt %v",
		out.seconds, out.took.Seconds(), out.seconds/out.took.Seconds(), out.turns, out.invalid, out.reasons, out.blocks, out.duties, out.unseen)
	for _, h := range out.findings {
		t.Logf("  %7.1f s  %-34s %-9v %s", h.at, h.key, h.grade, h.said)
	}
	for _, h := range out.alarms {
		t.Logf("  %7.1f s  alarm %-28s %-9v %-12s %s", h.at, h.key, h.grade, h.state, h.said)
	}
}
