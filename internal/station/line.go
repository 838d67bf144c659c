package station

import (
	"errors"
	"math"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/measure"
	"lapwing/internal/ripple"
	"lapwing/internal/sensor"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/verdict"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// Line is the pure middle in one piece: blocks in, turn records, findings and alarm transitions out. The daemon and
// the offline review run this same code; it has no clock, file or goroutine.
type Line struct {
	sk     *skid.Skid
	info   acq.Info
	proc   processAt
	layout measure.Layout

	frames   *frame.Assembler
	turns    *turn.Converter
	uneven   *ripple.Book // nil: the ripple of the phase reference is all there is
	windows  *window.Tracker
	measures *measure.Measurer
	gas      *gasBook
	watches  []*duty.Watch
	record   *wire.Recorder
	records  Records
	whole    int64 // sample at which the newest whole record begins
	learn    LearnPlan
	learner  *duty.Learner
	learnt   int     // steady turns that every throw has given to the learner
	study    study   // what becomes of them
	clock    float64 // s, sample clock of the newest turn
	ref      *duty.Reference
	base     *duty.Baseline
	blocks   *duty.Blocks
	judge    *verdict.Judge
	alarms   *alarm.Annunciator
	limits   []limitWatch
	sensors  *sensors
	readings readings
	reasons  *reasons    // nil: not kept
	angles   turn.Config // what turns was made of
	gauges   *gauges
	levels   *levels
	slip     *slip

	vec    measure.Vector
	win    []window.Input
	behind []float64      // by throw: Pa, the suction line
	pocket [][2][]float64 // by throw and end: the clearances that the load steps give
	mea    []measure.Input
	points []duty.Point
	devs   []duty.Deviation
	part   [][]int32 // scratch of cut
	conds  []alarm.Condition
	out    func(*Output)
	marked func(turn int64, at float64) // hears of every phase mark that opens a turn; nil: nobody
	crew   *crew                        // nil: everything one after the other
	count  Count
	steady []int

	begun bool
	start float64 // s, sample clock at the stream's first sample; a clip does not begin at sample 0
}

// Records says which turns get a whole record. The others get the head only: a valid turn without throws.
type Records uint8

// The cases. A record costs about a tenth of the line, and is made for whoever reads it.
const (
	EveryTurn Records = iota
	Newest            // the first turn of every half second or so: for a page that is looked at
	Heads             // none
)

const (
	newestEvery = 0.5 // s, how often Newest gives a whole record
	never       = math.MinInt64 / 2
)

// wants reports whether a turn gets a whole record, and books it.
func (l *Line) wants(t *turn.Turn) bool {
	if l.records == Newest && t.Seq0 < l.whole+int64(newestEvery*l.info.Rate) || l.records == Heads {
		return false
	}
	l.whole = t.Seq0
	return true
}

// Count is what has passed through the line.
type Count struct {
	Turns, Invalid int64
	Reasons        map[string]int64 // why turns were not valid
	Samples, Lost  int64
	Blocks         int64 // evidence blocks judged
}

// Output is what one turn brought. Between turns (its Record has no Type) it brings only that the marks are gone.
type Output struct {
	Record      wire.Turn         // of a valid turn with throws or without, see Records
	Turn        *turn.Turn        // valid until the next turn; nil between turns
	Windows     window.Result     // valid until the next turn
	At          time.Time         // of the turn's dead centre
	Vector      *measure.Vector   // valid until the next turn
	Points      []duty.Point      // per throw, likewise
	Findings    []verdict.Finding // all that stand, when Judged
	Judged      bool              // at least one throw's evidence block closed with this turn
	News        []verdict.Finding // what the judge said of the throws whose block closed, ended findings with grade None
	Transitions []alarm.Transition
	Baseline    *duty.Baseline // set on the turn on which a learning run ended, and is in force
	Proposed    *duty.Baseline // set instead where it waits for a person's word
	LearnError  error          // why a learning run that ended gave no baseline
}

// NewLine builds the line for a skid and a source. base may be nil; alarms may be a restored annunciator.
func NewLine(sk *skid.Skid, info acq.Info, proc processAt, learn LearnPlan, base *duty.Baseline, alarms *alarm.Annunciator) (*Line, error) {
	l := &Line{sk: sk, info: info, proc: proc, learn: learn, alarms: alarms, gas: newGasBook(sk.Gas)}
	l.count.Reasons = map[string]int64{}
	var err error
	if l.frames, err = frame.New(frameConfig(sk, info)); err != nil {
		return nil, err
	}
	marks := turnConfig(sk, info)
	marks.Do = l.each
	if l.uneven, err = rippleBook(sk, len(marks.Marks.Inner)+1); err != nil {
		return nil, err
	}
	if l.uneven != nil {
		marks.Marks.Shaft = l.shaft
	}
	l.gauges = newGauges(sk, info.Rate)
	if base != nil && !learn.wanted() {
		l.gauges.hold(base.Passages)
	}
	l.angles = marks
	l.gauges.configure(&marks)
	if l.turns, err = turn.New(marks); err != nil {
		return nil, err
	}
	l.measures = measure.New(measure.Config{Machine: measureMachine(sk), Atmosphere: sk.Machine.Atmosphere, Do: l.each})
	l.layout = l.measures.Layout()
	if l.sensors, err = newSensors(sk, info, l.layout, l.each); err != nil {
		return nil, err
	}
	l.levels, l.slip = newLevels(sk, l.layout), newSlip(sk, l.layout)
	l.windows = window.NewTracker(window.Config{Works: works(sk)})
	l.record, l.whole = wire.NewRecorder(sk, l.layout, info.Rate), never
	for i := range sk.Throws {
		l.watches = append(l.watches, duty.NewWatch(duty.WatchConfig{MinRPM: sk.Machine.MinRPM * 0.97, MaxRPM: sk.Machine.MaxRPM * 1.03, Steps: dutySteps(sk, i)}))
	}
	n := len(sk.Throws)
	l.pocket, l.behind = clearances(sk), make([]float64, n)
	l.win, l.mea, l.points, l.steady = make([]window.Input, n), make([]measure.Input, n), make([]duty.Point, n), make([]int, n)
	if l.limits, err = limitWatches(sk, l.layout); err != nil {
		return nil, err
	}
	if learn.wanted() {
		l.learner = duty.NewLearner(l.layout, l.learnConfig())
	} else if base != nil {
		if err := l.judgeBy(base); err != nil {
			return nil, err
		}
	}
	return l, nil
}

// each does n pieces of work that do not touch each other, on as many cores as there are hands.
func (l *Line) each(n int, f func(i int)) {
	if l.crew != nil {
		l.crew.do(n, f)
		return
	}
	for i := range n {
		f(i)
	}
}

// Layout is the order of the features.
func (l *Line) Layout() measure.Layout { return l.layout }

// Count is what has passed so far.
func (l *Line) Count() Count { return l.count }

// Phase is the state of the shaft reference.
func (l *Line) Phase() frame.Status { return l.frames.Status() }

// Channels is the state of every channel.
func (l *Line) Channels() []wire.Channel {
	out := l.sensors.health()
	l.gauges.remark(out)
	l.levels.remark(out)
	l.remarkRipple(out)
	return out
}

// Learnt gives the steady turns learnt so far and how many are wanted; 0, 0 when no learning run is on.
func (l *Line) Learnt() (have, want int) {
	if l.learner == nil {
		return 0, 0
	}
	if l.learn.Steady > 0 {
		return l.learnt, l.learn.Steady
	}
	return l.learnt, int(l.learn.To - l.learn.From)
}

// Judging reports whether a baseline is in force.
func (l *Line) Judging() bool { return l.ref != nil }

// Coverage tells what the learning run has seen, also while its outcome waits; nil when there is none.
func (l *Line) Coverage() []duty.Coverage {
	if l.learner == nil {
		return l.study.coverage
	}
	return l.learner.Coverage()
}

// Memory is what a restart should not have to learn again, beside baseline and alarm states: the valves' lags, what is
// usual on each channel, and the evidence of the last blocks, without which a standing alert would fall and rise again.
type Memory struct {
	Windows window.Memory     `json:"windows"`
	Judge   *verdict.Snapshot `json:"judge,omitempty"`
	Heard   *measure.Memory   `json:"heard,omitempty"` // what each valve sounds like
	Sensors *sensor.Memory    `json:"sensors,omitempty"`
	Slow    []duty.SlowTest   `json:"slow,omitempty"`   // the slow tests of the measures
	Gauges  []duty.Passage    `json:"gauges,omitempty"` // passages that were found and are undone
	Zeros   []duty.Zero       `json:"zeros,omitempty"`  // what is taken off the pressures
	Ripple  ripple.Memory     `json:"ripple,omitempty"` // the computed ripple by load step
}

// Memory copies it out.
func (l *Line) Memory() Memory {
	usual := l.sensors.Snapshot()
	m := Memory{Windows: l.windows.Snapshot(), Sensors: &usual}
	if l.judge != nil {
		s := l.judge.Snapshot()
		m.Judge = &s
		m.Slow = l.blocks.SlowTests()
	}
	heard := l.measures.Snapshot()
	m.Heard = &heard
	m.Gauges, m.Zeros = l.gauges.inForce(), l.levels.off()
	if l.uneven != nil {
		m.Ripple = l.uneven.Snapshot()
	}
	return m
}

// Remember takes it back. What does not fit this machine is left out and named in the error.
func (l *Line) Remember(m Memory) error {
	err := l.windows.Restore(m.Windows)
	if m.Judge != nil && l.judge != nil {
		err = errors.Join(err, l.judge.Restore(*m.Judge))
	}
	if l.blocks != nil {
		l.blocks.Resume(m.Slow, nil)
	}
	if m.Heard != nil {
		err = errors.Join(err, l.measures.Restore(*m.Heard))
	}
	if m.Sensors != nil {
		err = errors.Join(err, l.sensors.Restore(*m.Sensors))
	}
	if l.gauges.open {
		l.gauges.take(m.Gauges, false)
	} else {
		l.levels.take(m.Zeros)
	}
	if l.uneven != nil {
		err = errors.Join(err, l.uneven.Restore(m.Ripple))
	}
	return err
}

// Alarms is the annunciator.
func (l *Line) Alarms() *alarm.Annunciator { return l.alarms }

// Add passes a block through the line; emit hears of every turn that is complete.
func (l *Line) Add(b *acq.Block, emit func(*Output)) error {
	if !l.begun {
		l.begun, l.start = true, float64(b.Seq0)/l.info.Rate
	}
	l.count.Samples += int64(b.N)
	l.count.Lost += b.Lost
	l.out = emit
	return l.cut(b)
}

// cut passes a block on in parts that end where the shaft reference is to be asked: at the same samples however the
// stream was cut.
func (l *Line) cut(b *acq.Block) error {
	for _, x := range b.Counts {
		if len(x) != b.N {
			return l.frames.Add(b, l.frame) // which says what is wrong with it
		}
	}
	for from := 0; ; {
		end := b.Seq0 + int64(from)
		part := int(l.sensors.every - end%l.sensors.every)
		if from == 0 && part >= b.N {
			if err := l.frames.Add(b, l.frame); err != nil {
				return err
			}
			if part == b.N {
				l.reference(b.Seq0 + int64(b.N))
			}
			return nil
		}
		part = min(part, b.N-from)
		p := *b
		p.Seq0, p.N, p.Counts = end, part, l.part[:0]
		if from > 0 {
			p.Lost = 0
		}
		for _, x := range b.Counts {
			p.Counts = append(p.Counts, x[from:from+part])
		}
		l.part = p.Counts
		if err := l.frames.Add(&p, l.frame); err != nil {
			return err
		}
		if from += part; (end+int64(part))%l.sensors.every == 0 {
			l.reference(end + int64(part))
		}
		if from >= b.N {
			return nil
		}
	}
}

// reference asks the shaft reference how it does. When its marks are gone there are no turns to say so with.
func (l *Line) reference(seq int64) {
	l.sensors.Reference(l.frames.Status(), seq)
	for i, k := range l.sensors.kinds {
		if st := l.sensors.State(i); k == skid.PhaseMark && st.Category > sensor.Good && st.Fault == sensor.NoMarks && st.First == seq {
			o := Output{At: l.utc(float64(seq) / l.info.Rate), Vector: &l.vec, Points: l.points}
			o.Record.Turn, o.Record.TimeS = st.Since, math.Round((float64(seq)/l.info.Rate-l.start)*1e7)/1e7
			o.Transitions = l.alarms.Step(o.At, l.sensors.condition(nil, i, st.Since, seq, l.reach()))
			l.out(&o)
		}
	}
}

// reach is how far back a sensor's alarm asks for raw samples, beside what the skid file protects anyway.
func (l *Line) reach() int64 { return int64(10 * l.info.Rate) }

// Flush ends the stream: the last turns come out as far as they can be had.
func (l *Line) Flush(emit func(*Output)) {
	l.out = emit
	l.frames.Flush(l.frame)
	l.turns.Flush(l.turn)
}

func (l *Line) frame(f *frame.Frame) {
	if l.marked != nil {
		l.marked(f.Turn, f.Mark0)
	}
	l.sensors.Declare(l.declares(f.Turn))
	l.sensors.Frame(f)
	if l.gauges.changed {
		if err := l.change(); err != nil { // cannot be: what is found lies far inside what may be undone
			l.gauges.changed = false
		}
	}
	l.gauges.frame(f)
	l.turns.Add(f, l.turn)
}

// utc is the time at so many seconds of sample clock; without a stated start sample 0 is taken in 1970, which says
// nothing about the day.
func (l *Line) utc(clock float64) time.Time {
	start := l.info.Start
	if start.IsZero() {
		start = time.Unix(0, 0).UTC()
	}
	return start.Add(time.Duration(math.Round(clock * 1e9)))
}

// fromStart makes a record's times count from the first sample of the stream instead of from sample 0.
func (l *Line) fromStart(r *wire.Turn) {
	if l.start == 0 {
		return
	}
	since := func(t float64) float64 { return math.Round((t-l.start)*1e7) / 1e7 }
	r.TimeS = since(r.TimeS)
	for i := range r.Throws {
		if t := r.Throws[i].TimeS; t != nil {
			*t = since(*t)
		}
	}
}

// shaft gives the ripple in force at a time of the sample clock: that of the load step in the process values then.
func (l *Line) shaft(t float64) turn.Shaft {
	step := noStep
	if p := l.proc(t); p.Known {
		step = p.Step
	}
	return l.uneven.For(step)
}

// noStep is a code that no skid file can give a load step.
const noStep = -1

func (l *Line) turn(t *turn.Turn) {
	o := Output{Turn: t, Vector: &l.vec, Points: l.points}
	l.count.Turns++
	l.clock = t.Time
	proc := l.proc(t.Time)
	l.prepare(t, proc)
	l.sensors.withdraw(t)
	l.levels.correct(t)
	if l.uneven != nil && t.Valid() {
		for i := range l.behind {
			l.behind[i] = l.win[i].LinePs
		}
		l.uneven.Learn(t, l.behind) // before anybody uses the turn's uncertainty
	}
	w := l.windows.Track(t, l.win)
	for i := range l.points {
		l.points[i] = l.classify(i, t, proc, w)
	}
	l.gauges.turn(t, w, l.points, l.sensors, l.utc(t.Time))
	if t.Valid() {
		l.refine(w)
		l.measures.Measure(&l.vec, t, w, l.mea)
		l.sensors.strip(&l.vec, t)
		l.levels.strip(&l.vec)
		l.sensors.level(t, w)
	} else {
		l.count.Invalid++
		l.whole = never // what comes next is news
		l.count.Reasons[t.Reason]++
		l.reasons.lost(t, l.points)
	}
	if o.Windows = w; t.Valid() && l.wants(t) {
		o.Record = l.record.Record(t, w, &l.vec, l.points)
	} else {
		o.Record = l.record.Head(t)
	}
	o.At = l.utc(o.Record.TimeS)
	l.fromStart(&o.Record)
	if t.Valid() {
		l.teach(t, &o)
		l.decide(t, &o)
	}
	l.out(&o)
}

// prepare sets what windows and measures are told about this turn: cylinder with its pockets, lines, gas.
func (l *Line) prepare(t *turn.Turn, proc skid.Process) {
	step, _ := l.sk.FindStep(proc.Step)
	nan := math.NaN()
	for i := range l.sk.Throws {
		th := &l.sk.Throws[i]
		line := skid.Line{Ps: nan, Pd: nan, Ts: nan, Td: nan}
		if proc.Known && th.Stage-1 < len(proc.Stages) {
			line = proc.Stages[th.Stage-1]
		}
		in := window.Input{Cylinder: l.sk.Throws[i].Cylinder, LinePs: line.Ps, LinePd: line.Pd, Others: l.pocket[i]}
		if proc.Known {
			in.Cylinder = l.sk.CylinderAt(i, proc.Step)
			for e := range in.IdleHint {
				name := l.sk.EndName(i, e)
				in.IdleHint[e], in.Late[e] = step.Idle[name], step.Late[name]
			}
		}
		if p, ok := l.gas.at(line.Ps, line.Ts, line.Pd); ok {
			in.K = p.KV
		} else {
			in.K = l.nominalK()
		}
		l.win[i] = in
		l.mea[i] = measure.Input{Cylinder: in.Cylinder, LinePs: line.Ps, LinePd: line.Pd, Ts: line.Ts, Td: line.Td, Covers: proc.Covers}
	}
}

// refine gives the measures the line pressures as they are by now (process values come late, and the plateaus show by
// how much), the clearance that fits the trace, and the gas at this turn's duty: the line's, or the plateaus where the
// line is not known.
func (l *Line) refine(w window.Result) {
	for i := range l.mea {
		in := &l.mea[i]
		if p := &l.points[i]; !p.Inferred {
			in.LinePs, in.LinePd = p.Ps, p.Pd
		}
		ps, pd := in.LinePs, in.LinePd
		for e := range w.Throws[i].Ends {
			if math.IsNaN(ps) {
				ps = w.Throws[i].Ends[e].Ps
			}
			if math.IsNaN(pd) {
				pd = w.Throws[i].Ends[e].Pd
			}
			if c := w.Throws[i].Ends[e].Clearance; !math.IsNaN(c) {
				in.Cylinder.Clearance[e] = c
			}
		}
		ts := in.Ts
		if math.IsNaN(ts) && len(l.sk.Process.Stages) >= l.sk.Throws[i].Stage {
			ts = l.sk.Process.Stages[l.sk.Throws[i].Stage-1].Ts
		}
		if p, ok := l.gas.measures(ps, ts, pd); ok {
			in.Gas = p
		}
	}
}

// nominalK is the volume exponent at the skid file's own duty, for turns whose duty is not known.
func (l *Line) nominalK() float64 {
	for _, s := range l.sk.Process.Stages {
		if p, ok := l.gas.at(s.Ps, s.Ts, s.Pd); ok {
			return p.KV
		}
	}
	return 0 // the windows take their own default
}

func (l *Line) classify(i int, t *turn.Turn, proc skid.Process, w window.Result) duty.Point {
	in := duty.Input{Turn: t.Number, Valid: t.Valid(), RPM: t.RPM, ProcessKnown: proc.Known && proc.Age < processTooOld,
		Step: proc.Step, Ps: l.win[i].LinePs, Pd: l.win[i].LinePd}
	for e := range in.OwnPs {
		in.OwnPs[e], in.OwnPd[e] = math.NaN(), math.NaN()
		if i < len(w.Throws) {
			end := &w.Throws[i].Ends[e]
			in.OwnPs[e], in.OwnPd[e], in.Ends[e] = end.Ps, end.Pd, end.State
			in.OtherStep = in.OtherStep || !math.IsNaN(end.Clearance)
		}
	}
	return l.watches[i].Classify(in)
}

// processTooOld is the age beyond which process values no longer say what the machine is asked to do.
const processTooOld = 30 * time.Second

// decide gathers evidence, judges complete blocks and steps the alarms.
func (l *Line) decide(t *turn.Turn, o *Output) {
	conds := l.conds[:0]
	now := l.utc(t.Time)
	conds = l.limitConditions(conds, t)
	conds = l.sensors.conditions(conds, t.Number, t.Seq1, l.reach())
	conds = l.readingConditions(conds, t)
	if l.ref == nil {
		for i := range l.points {
			l.reasons.add(i, t, l.points[i], l.notCompared(i), nil, nil)
		}
	} else {
		for i := range l.points {
			l.devs = l.ref.Deviate(l.devs[:0], i, l.points[i], &l.vec)
			l.sensors.compare(i, t, l.points[i], l.devs)
			l.levels.compare(i, t, t.Time, l.points[i], l.devs, l.sensors)
			l.slip.compare(i, t, l.points[i], l.devs, l.sensors)
			l.reasons.add(i, t, l.points[i], l.notCompared(i), l.layout, l.devs)
			block, ok := l.blocks.Add(i, l.points[i], &l.vec, l.devs)
			if !ok {
				continue
			}
			l.count.Blocks++
			o.Judged = true
			findings := l.judge.Judge(block)
			l.reasons.judged(l.judge)
			o.News = append(o.News, findings...)
			conds = l.findingConditions(conds, i, &block, findings)
		}
		if o.Judged {
			o.Findings = l.judge.Findings()
		}
	}
	l.conds = conds
	if len(conds) > 0 {
		o.Transitions = l.alarms.Step(now, conds)
	}
}
