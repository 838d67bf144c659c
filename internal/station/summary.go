package station

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

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
	raised   []string
	remarks  []string
	valid    bool  // a valid turn was seen
	last     int64 // the last of them
}

func newSummary() *summary { return &summary{states: map[string]map[string]int64{}} }

func (s *summary) add(sk *skid.Skid, o *Output) {
	if o.Record.Valid {
		s.valid, s.last = true, o.Record.Turn
		for i := range o.Windows.Throws {
			for e := range o.Windows.Throws[i].Ends {
				if end := &o.Windows.Throws[i].Ends[e]; !end.NotPresent {
					s.count(sk.EndName(i, e), end.State.String())
				}
			}
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
		s.raised = append(s.raised, fmt.Sprintf("%8.1f s, turn %d: %s %s → %s, %s: %s", o.Record.TimeS, t.Turn, t.Key, t.From, t.To, t.Severity, t.Sentence))
	}
}

func (s *summary) count(end, state string) {
	if s.states[end] == nil {
		s.states[end] = map[string]int64{}
	}
	s.states[end][state]++
}

// unended says that a learning run that was to end before turn to never did.
func (s *summary) unended(to int64) error {
	if !s.valid {
		return errors.New("the learning run never began: no turn of the recording is valid")
	}
	return fmt.Errorf("the learning run never ended: it was to end with turn %d, and the last valid turn of the recording is %d; nothing was learnt and nothing judged", to-1, s.last)
}

func (s *summary) print(w io.Writer, l *Line, took time.Duration, signal float64) {
	c := l.Count()
	fmt.Fprintf(w, "%d turns in %.1f s of signal, %d not valid; %.1f times real time\n", c.Turns, signal, c.Invalid, signal/took.Seconds())
	for _, k := range sortedKeys(c.Reasons) {
		fmt.Fprintf(w, "  %6d  %s\n", c.Reasons[k], k)
	}
	if c.Lost > 0 {
		fmt.Fprintf(w, "%d samples missing\n", c.Lost)
	}
	for _, r := range s.remarks {
		fmt.Fprintln(w, r)
	}
	for _, r := range l.found() {
		fmt.Fprintln(w, r)
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
		for _, d := range s.baseline.Doubts {
			fmt.Fprintln(w, "doubt, was it healthy? "+d.String())
		}
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
