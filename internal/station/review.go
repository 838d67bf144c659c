package station

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"
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
	Out                             io.Writer // one JSON record a line; nil: none
	Summary                         io.Writer // nil: none
	Progress                        io.Writer // a terminal for a progress bar; nil: none
}

// Review runs the whole line on a recording as fast as it goes. A damaged recording is reviewed as far as it can be
// read; the error then says what is missing, after the records and the summary of what there was.
func Review(ctx context.Context, o ReviewOptions) error {
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
	r := &review{sk: sk, src: src, total: src.Len(), sum: newSummary(), held: newHeld()}
	if o.Out != nil {
		r.out = bufio.NewWriterSize(o.Out, 1<<16)
	}
	r.bar.w = o.Progress
	start := float64(src.Meta().Seq0) / src.Info().Rate
	r.proc = func(t float64) skid.Process { return proc(t - start + rowSlack) }
	if r.line, err = NewLine(sk, src.Info(), r.held.at, LearnPlan{From: o.LearnFrom, To: o.LearnTo}, base, alarm.New(AlarmTiming(sk))); err != nil {
		return err
	}
	err = r.run(ctx)
	if o.SaveBaseline != "" && r.sum.baseline != nil {
		raw, berr := r.sum.baseline.Encode()
		if berr == nil {
			berr = os.WriteFile(o.SaveBaseline, raw, 0o644)
		}
		err = errors.Join(err, berr)
	}
	if o.Summary != nil {
		r.sum.print(o.Summary, r.line, time.Since(r.began), float64(r.line.Count().Samples)/src.Info().Rate)
	}
	for _, m := range src.Remarks() {
		if o.Summary != nil {
			fmt.Fprintln(o.Summary, "recording:", m)
		}
	}
	return err
}

// rowSlack keeps a row that begins at a whole second from being missed by the last bit of a subtraction.
const rowSlack = 1e-6

func loadBaseline(path string) (*duty.Baseline, error) {
	if path == "" {
		return nil, nil
	}
	raw, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("review: baseline: %w", err)
	}
	return duty.ParseBaseline(raw)
}

type review struct {
	sk    *skid.Skid
	src   *wav.Source
	line  *Line
	proc  processAt
	held  *held
	clock rowClock
	out   *bufio.Writer
	total int64
	bar   bar
	sum   *summary
	began time.Time
}

func (r *review) run(ctx context.Context) error {
	r.began = time.Now()
	var failed error
	emit := func(o *Output) {
		r.sum.add(o)
		if err := r.write(o); err != nil && failed == nil {
			failed = err
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
			break
		}
		for _, w := range r.clock.rows(&b, r.src.Info().Rate, r.proc) {
			r.held.put(w)
		}
		if err := r.line.Add(&b, emit); err != nil {
			failed = fmt.Errorf("review: %w", err)
		}
		r.bar.show(r.line.Count().Samples, r.total, r.line.Count().Turns)
	}
	r.line.Flush(emit)
	r.bar.end()
	if r.out != nil {
		failed = errors.Join(failed, r.out.Flush())
	}
	return failed
}

type findingRecord struct {
	Type  string  `json:"type"`
	TimeS float64 `json:"t_s"`
	wire.Finding
}

type transitionRecord struct {
	Type  string  `json:"type"`
	TimeS float64 `json:"t_s"`
	wire.Alarm
}

// write puts out one line per turn, per finding of a judged block, and per transition.
func (r *review) write(o *Output) error {
	if r.out == nil {
		return nil
	}
	put := func(v any) error {
		b, err := json.Marshal(v)
		if err != nil {
			return fmt.Errorf("review: turn %d: %w", o.Record.Turn, err)
		}
		_, err = r.out.Write(append(b, '\n'))
		return err
	}
	errs := []error{put(o.Record)}
	for _, f := range o.News {
		errs = append(errs, put(findingRecord{Type: "finding", TimeS: o.Record.TimeS, Finding: wire.FromFinding(&f, r.line.Layout())}))
	}
	for i := range o.Transitions {
		errs = append(errs, put(transitionRecord{Type: "transition", TimeS: o.Record.TimeS, Alarm: wire.FromTransition(r.sk.ID, &o.Transitions[i], "")}))
	}
	return errors.Join(errs...)
}

// bar is a progress bar on a terminal, drawn at most ten times a second.
type bar struct {
	w    io.Writer
	last time.Time
}

func (b *bar) show(done, total, turns int64) {
	if b.w == nil || time.Since(b.last) < 100*time.Millisecond {
		return
	}
	b.last = time.Now()
	share := 1.0
	if total > 0 {
		share = min(1, float64(done)/float64(total))
	}
	const width = 40
	n := int(share * width)
	fmt.Fprintf(b.w, "\r[%s%s] %3.0f %%, %d turns ", strings.Repeat("=", n), strings.Repeat(" ", width-n), share*100, turns)
}

func (b *bar) end() {
	if b.w != nil {
		fmt.Fprint(b.w, "\r", strings.Repeat(" ", 70), "\r")
	}
}

// summary is what the terminal shows at the end.
type summary struct {
	states   map[string]map[string]int64 // end → state → turns
	baseline *duty.Baseline
	learnErr error
	open     map[string]string // finding → sentence, as last judged
	raised   []string
}

func newSummary() *summary {
	return &summary{states: map[string]map[string]int64{}, open: map[string]string{}}
}

func (s *summary) add(o *Output) {
	for i := range o.Record.Throws {
		t := &o.Record.Throws[i]
		for j := range t.Ends {
			name := t.ID + "." + t.Ends[j].End
			if s.states[name] == nil {
				s.states[name] = map[string]int64{}
			}
			s.states[name][t.Ends[j].State]++
		}
	}
	if o.Baseline != nil {
		s.baseline = o.Baseline
	}
	if o.LearnError != nil {
		s.learnErr = o.LearnError
	}
	for i := range o.Transitions {
		t := &o.Transitions[i]
		s.raised = append(s.raised, fmt.Sprintf("turn %d: %s %s → %s, %s: %s", t.Turn, t.Key, t.From, t.To, t.Severity, t.Sentence))
	}
}

func (s *summary) print(w io.Writer, l *Line, took time.Duration, signal float64) {
	c := l.Count()
	fmt.Fprintf(w, "%d turns in %.1f s of signal, %d not valid; %.1f times real time\n", c.Turns, signal, c.Invalid, signal/took.Seconds())
	for _, k := range sortedKeys(c.Reasons) {
		fmt.Fprintf(w, "  %6d  %s\n", c.Reasons[k], k)
	}
	for _, end := range sortedKeys(s.states) {
		fmt.Fprintf(w, "%s windows:", end)
		for _, st := range sortedKeys(s.states[end]) {
			fmt.Fprintf(w, "  %s %d", st, s.states[end][st])
		}
		fmt.Fprintln(w)
	}
	switch {
	case s.learnErr != nil:
		fmt.Fprintln(w, "no baseline:", s.learnErr)
	case s.baseline != nil:
		fmt.Fprintf(w, "baseline learnt from turns %d to %d, %d load steps and throws\n", s.baseline.Turn0, s.baseline.Turn1, len(s.baseline.Cells))
	case l.Judging():
		fmt.Fprintln(w, "judged by the baseline given")
	default:
		fmt.Fprintln(w, "measured only: without --learn or --baseline nothing is judged")
	}
	fmt.Fprintf(w, "%d evidence blocks judged, %d alarm transitions\n", c.Blocks, len(s.raised))
	for _, r := range s.raised {
		fmt.Fprintln(w, "  "+r)
	}
	if len(s.raised) > 0 {
		fmt.Fprintln(w, wire.Caution)
	}
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}
