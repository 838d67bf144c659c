package exec

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os/exec"
	"strings"
	"sync"
	"time"
)

// once runs the program to its end, or until it stalls or ctx ends. Everything that it started has stopped, and both pipes
// are at their end, when once returns.
func (s *Source) once(ctx context.Context) error {
	run, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	cmd := exec.CommandContext(run, s.c.Command[0], s.c.Command[1:]...)
	apart(cmd)
	cmd.WaitDelay = s.c.grace
	out, err := cmd.StdoutPipe()
	if err != nil {
		return err
	}
	said, err := cmd.StderrPipe()
	if err != nil {
		return err
	}
	if err := cmd.Start(); err != nil {
		return err
	}
	s.count(func(st *Stats) { st.Starts++ })
	var errs sync.WaitGroup
	last := ""
	errs.Go(func() { last = s.listen(said) })

	alive := time.AfterFunc(s.c.First, func() { cancel(errStall) })
	raw := make([]byte, s.block*s.format.size*s.c.Channels)
	anew := true
	for {
		n, err := io.ReadFull(out, raw)
		frame := s.format.size * s.c.Channels
		if n >= frame && run.Err() == nil {
			s.take(ctx, raw[:n-n%frame], anew)
			anew = false
		}
		if n%frame != 0 {
			s.count(func(st *Stats) { st.Partial++ })
		}
		if err != nil {
			break
		}
		alive.Reset(s.c.Stall)
	}
	alive.Stop()
	if run.Err() != nil {
		killGroup(cmd) // what it started and left behind
	}
	errs.Wait()
	err = cmd.Wait()
	if errors.Is(context.Cause(run), errStall) {
		s.count(func(st *Stats) { st.Stalls++ })
		if anew {
			return fmt.Errorf("%w for %s after its start", errStall, s.c.First)
		}
		return fmt.Errorf("%w for %s", errStall, s.c.Stall)
	}
	if err != nil && last != "" {
		err = fmt.Errorf("%w: %s", err, last)
	}
	return err
}

var errStall = errors.New("it gave no samples")

// saying is a line of the program's: a log that drops repeats looks past the digits of what is no plain string.
type saying string

const (
	longLine = 500 // bytes logged of one line
	chatter  = 20  // lines logged in a minute
)

// listen passes standard error on, and gives its last line.
func (s *Source) listen(r io.Reader) (last string) {
	b := bufio.NewReaderSize(r, longLine)
	began, lines := s.c.Clock.Now(), 0
	more := func() {
		if lines > chatter {
			s.c.Log.Warn("acquisition: capture program said more than is logged", "program", s.c.Command[0], "lines", lines-chatter)
		}
	}
	defer more()
	for {
		raw, longer, err := b.ReadLine()
		line := strings.TrimSpace(strings.ToValidUTF8(string(raw), "?"))
		for longer && err == nil { // the rest of a line that is too long
			_, longer, err = b.ReadLine()
		}
		if line != "" {
			last = line
			if low := strings.ToLower(line); strings.Contains(low, "overrun") || strings.Contains(low, "xrun") {
				s.count(func(st *Stats) { st.Overruns++; st.LastAt = s.c.Clock.Now() })
			}
			if now := s.c.Clock.Now(); now.Sub(began) > time.Minute {
				more()
				began, lines = now, 0
			}
			if lines++; lines <= chatter {
				s.c.Log.Warn("acquisition: capture program", "program", s.c.Command[0], "says", saying(line))
			}
		}
		if err != nil {
			return last
		}
	}
}
