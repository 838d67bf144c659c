package station

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// ReviewOptions say what to run the line on, offline.
type ReviewOptions struct {
	SkidFile, Recording, ProcessCSV string
	LearnFrom, LearnTo              int64 // turns declared healthy, LearnTo not included; both 0: none
	Baseline, SaveBaseline          string
	State                           string    // state of the line at the recording's first sample; "": the one beside the recording, if any
	Cold                            bool      // start without a state, as if the machine had just been switched on
	OutFile                         string    // one JSON record a line; made only once all inputs are found good
	Out                             io.Writer // the same, where there is no OutFile; nil: none
	WhyFile                         string    // why things were found, or were not: a line a turn and throw, and one a block
	Summary                         io.Writer // nil: none
	Progress                        io.Writer // a terminal for a progress bar; nil: none

	each func(*Line, *Output) // hears of every turn; nil: nobody
}

// Review runs the whole line on a recording as fast as it goes. A damaged recording is reviewed as far as it can be
// read, and an interrupted review keeps what it has; the error then says what is missing, after the records and the
// summary of what there was. A learning run that was asked for and gave no baseline is an error too.
func Review(ctx context.Context, o ReviewOptions) (err error) {
	if err := o.check(); err != nil {
		return err
	}
	sk, err := skid.Load(o.SkidFile)
	if err != nil {
		return err
	}
	if err := checkMachine(sk); err != nil {
		return err
	}
	src, err := wav.Open(o.Recording, wav.Options{})
	if err != nil {
		return err
	}
	defer src.Close()
	if n := inputs(sk); src.Info().Channels < n {
		return fmt.Errorf("review: %s has %d channels, the skid file uses input %d (inputs count from 0)", o.Recording, src.Info().Channels, n-1)
	}
	proc := fixed(sk)
	if o.ProcessCSV != "" {
		if proc, err = readProcess(o.ProcessCSV, sk); err != nil {
			return err
		}
	}
	base, err := loadBaseline(o.Baseline)
	if err != nil {
		return err
	}
	r := &review{o: &o, sk: sk, src: src, proc: proc.from(firstSecond(src)), held: newHeld(), sum: newSummary(), bar: bar{w: o.Progress}}
	if r.line, err = NewLine(sk, src.Info(), r.held.at, LearnPlan{From: o.LearnFrom, To: o.LearnTo}, base, alarm.New(AlarmTiming(sk))); err != nil {
		return err
	}
	crew := newCrew()
	defer crew.close()
	r.line.crew = crew
	if o.OutFile != "" {
		f, err := create(o.OutFile, o.SkidFile, o.Recording, o.ProcessCSV, o.Baseline)
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, f.Close()) }()
		o.Out = f
	}
	if o.WhyFile != "" {
		var why *whyFile
		why, err = keepReasons(r.line, o.WhyFile, o.SkidFile, o.Recording, o.ProcessCSV, o.Baseline, o.OutFile)
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, why.close()) }()
	}
	if o.Out != nil {
		r.out = bufio.NewWriterSize(o.Out, 1<<16)
	} else {
		r.line.records = Heads
	}
	r.remark(base)
	if err := r.resume(crew); err != nil {
		return err
	}
	began := time.Now()
	err = errors.Join(r.run(ctx), r.learnt())
	if o.Summary != nil {
		r.sum.print(o.Summary, r.line, time.Since(began), float64(r.line.Count().Samples)/src.Info().Rate)
	}
	return err
}

// check refuses what contradicts itself.
func (o *ReviewOptions) check() error {
	learn := LearnPlan{From: o.LearnFrom, To: o.LearnTo}.wanted()
	switch {
	case learn && o.Baseline != "":
		return errors.New("review: a baseline is either learnt or given: leave one of the two out")
	case o.SaveBaseline != "" && !learn:
		return errors.New("review: there is no baseline to save: say which turns were healthy, so that one is learnt")
	}
	return nil
}

// create makes a file that is none of the inputs: what is being read must not be cut off.
func create(path string, inputs ...string) (*os.File, error) {
	if st, err := os.Stat(path); err == nil {
		for _, in := range inputs {
			if is, err := os.Stat(in); err == nil && os.SameFile(st, is) {
				return nil, fmt.Errorf("review: %s is read by this review: name another file for the records", path)
			}
		}
	}
	f, err := os.Create(path)
	if err != nil {
		return nil, fmt.Errorf("review: records: %w", err)
	}
	return f, nil
}

func loadBaseline(path string) (*duty.Baseline, error) {
	if path == "" {
		return nil, nil
	}
	raw, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("review: baseline: %w", err)
	}
	b, err := duty.ParseBaseline(raw)
	if err != nil {
		return nil, fmt.Errorf("review: %s: %w", path, err)
	}
	return b, nil
}

type review struct {
	o     *ReviewOptions
	sk    *skid.Skid
	src   *wav.Source
	line  *Line
	proc  processAt
	held  *held
	clock rowClock
	out   *bufio.Writer
	bar   bar
	sum   *summary
}

// remark notes what is odd and does not stop a review.
func (r *review) remark(base *duty.Baseline) {
	say := func(format string, a ...any) { r.sum.remarks = append(r.sum.remarks, fmt.Sprintf(format, a...)) }
	info := r.src.Info()
	for _, m := range r.src.Remarks() {
		say("recording: %s", m)
	}
	if r.sk.Rate > 0 && info.Rate != r.sk.Rate {
		say("recording: %g samples/s, the skid file says %g; the recording's is taken", info.Rate, r.sk.Rate)
	}
	if h := r.src.Meta().Skid; h != "" && h != r.sk.Hash {
		say("recording: made with another version of the skid file")
	}
	if base != nil && base.SkidHash != r.sk.Hash {
		say("baseline: learnt with another version of the skid file")
	}
	if p := r.proc(firstSecond(r.src)); !p.Known {
		say("process values: none known; pressures and load steps are taken from the cylinders' own traces, and what needs temperatures is absent")
	}
}

// resume goes on from the state of the line that lies beside a clip, unless something else was asked for.
func (r *review) resume(c *crew) error {
	path := r.o.State
	if path == "" {
		path = stateBeside(r.o.Recording)
	}
	switch {
	case r.o.Cold || path == "":
		return nil
	case r.o.State == "" && (r.o.Baseline != "" || r.line.learn.wanted()):
		r.sum.remarks = append(r.sum.remarks, "state: not used, since another baseline was asked for: the first turns differ from the live ones")
		return nil
	}
	restore, remark, err := openResume(path, r.sk, r.src.Info(), r.src.Meta().Seq0)
	if err != nil {
		return err
	}
	records := r.line.records
	if err := restore(r.line, r.held); err != nil {
		return err
	}
	r.line.goOn(records, c)
	if remark == "" {
		remark = "state: goes on from that of the live line, bit for bit"
	}
	r.sum.remarks = append(r.sum.remarks, remark)
	return nil
}

func (r *review) run(ctx context.Context) error {
	var failed error
	emit := func(o *Output) {
		r.sum.add(r.sk, o)
		if r.o.each != nil {
			r.o.each(r.line, o)
		}
		if failed == nil {
			failed = r.write(o)
		}
	}
	var b acq.Block
	for failed == nil {
		err := r.src.Read(ctx, &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			failed = err // what was readable has been reviewed
			if ctx.Err() != nil {
				failed = fmt.Errorf("review: stopped after %d turns: %w", r.line.Count().Turns, err)
			}
			break
		}
		for _, w := range r.clock.rows(&b, r.src.Info().Rate, r.proc) {
			r.held.put(w)
		}
		if err := r.line.Add(&b, emit); err != nil {
			failed = errors.Join(failed, fmt.Errorf("review: %w", err))
		}
		r.bar.show(r.line.Count().Samples, r.src.Len(), r.line.Count().Turns)
	}
	stopped := failed
	failed = nil
	r.line.Flush(emit)
	r.bar.end()
	if r.out != nil {
		if err := r.out.Flush(); err != nil && failed == nil {
			failed = fmt.Errorf("review: records: %w", err)
		}
	}
	if stopped != nil && failed != nil && errors.Is(failed, errors.Unwrap(stopped)) {
		return stopped // a writer that has failed fails again
	}
	return errors.Join(stopped, failed)
}

// learnt keeps the baseline, or says why a learning run that was asked for gave none.
func (r *review) learnt() error {
	if !(LearnPlan{From: r.o.LearnFrom, To: r.o.LearnTo}).wanted() {
		return nil
	}
	switch {
	case r.sum.baseline == nil && r.sum.learnErr == nil:
		r.sum.learnErr = r.sum.unended(r.o.LearnTo)
		fallthrough
	case r.sum.learnErr != nil:
		return fmt.Errorf("review: no baseline: %w", r.sum.learnErr)
	case r.o.SaveBaseline == "":
		return nil
	}
	raw, err := r.sum.baseline.Encode()
	if err == nil {
		err = os.WriteFile(r.o.SaveBaseline, raw, 0o644)
	}
	if err != nil {
		return fmt.Errorf("review: save baseline: %w", err)
	}
	return nil
}

// write puts out one line per turn, per finding of a judged block, and per transition.
func (r *review) write(o *Output) error {
	if r.out == nil {
		return nil
	}
	put := func(v any) error {
		b, err := json.Marshal(v)
		if err == nil {
			_, err = r.out.Write(append(b, '\n'))
		}
		if err != nil {
			return fmt.Errorf("review: record of turn %d: %w", o.Record.Turn, err)
		}
		return nil
	}
	if o.Record.Type != "" {
		if err := put(o.Record); err != nil {
			return err
		}
	}
	for i := range o.News {
		if err := put(wire.FindingRecord(o.Record.TimeS, &o.News[i], r.line.Layout())); err != nil {
			return err
		}
	}
	for i := range o.Transitions {
		line := wire.TransitionRecord(o.Record.TimeS, &o.Transitions[i])
		if r.src.Info().Start.IsZero() {
			line.At = time.Time{} // nobody knows the day
		}
		if err := put(line); err != nil {
			return err
		}
	}
	return nil
}
