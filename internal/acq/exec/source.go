package exec

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math"
	"os/exec"
	"sync"
	"time"

	"lapwing/internal/acq"
)

const (
	blockSeconds = 0.02
	queueSeconds = 5
	firstPause   = 500 * time.Millisecond
	longPause    = 30 * time.Second
	steady       = time.Minute // of running, after which the next pause is short again
)

// Source is a capture program as an acq.Source.
type Source struct {
	c      Config
	format format
	info   acq.Info
	block  int // samples
	stop   context.CancelFunc
	blocks chan *acq.Block // closed at the end
	over   chan struct{}   // everything has stopped

	mu    sync.Mutex
	stats Stats
	ended error // why there are no more blocks

	closeOnce sync.Once
	closed    chan struct{}

	// The feeding goroutine's own.
	ready chan error // of the first block
	begun bool
	next  int64 // sample number of the next frame from the program
	lost  int64 // not yet told
	note  string
	time  timeline
}

// Stats is what has been seen since Open.
type Stats struct {
	Starts    uint64  // of the program
	Stalls    uint64  // it gave nothing and was ended
	Overruns  uint64  // it said so on standard error (a line with overrun or xrun)
	Short     uint64  // times that samples went missing while it ran, by the clock
	Partial   uint64  // ends within a frame
	Full      uint64  // blocks that nobody took in time
	Lost      int64   // samples per channel, of all kinds
	DriftPPM  float64 // how much faster the converter is than its stated rate, by this machine's clock; NaN before ten minutes
	LastError string
	LastAt    time.Time // of the newest restart, loss or overrun; zero: none
}

var _ acq.Source = (*Source)(nil)

// ErrClosed is given by Read after Close.
var ErrClosed = errors.New("acq/exec: source is closed")

// Open starts the program and waits for its first block: the time of the first sample is known then.
func Open(ctx context.Context, c Config) (*Source, error) {
	f, err := c.check()
	if err != nil {
		return nil, err
	}
	if _, err := exec.LookPath(c.Command[0]); err != nil {
		return nil, fmt.Errorf("acq/exec: %w", err)
	}
	if c.Log == nil {
		c.Log = slog.New(slog.DiscardHandler)
	}
	if c.Clock == nil {
		c.Clock = acq.WallClock{}
	}
	if c.First == 0 {
		c.First = 10 * time.Second
	}
	if c.Stall == 0 {
		c.Stall = 5 * time.Second
	}
	if c.grace == 0 {
		c.grace = 2 * time.Second
	}
	s := &Source{c: c, format: f, block: max(1, int(blockSeconds*c.Rate)), over: make(chan struct{}), closed: make(chan struct{}), ready: make(chan error, 1)}
	s.info = acq.Info{Name: "exec:" + c.Command[0], Rate: c.Rate, Channels: c.Channels, Bits: f.bits}
	s.blocks = make(chan *acq.Block, max(2, int(queueSeconds/blockSeconds)))
	s.time = newTimeline(c.Rate)
	s.stats.DriftPPM = math.NaN()
	var inner context.Context
	inner, s.stop = context.WithCancel(context.Background())
	go s.feed(inner)
	wait := time.NewTimer(c.First)
	defer wait.Stop()
	select {
	case err = <-s.ready:
	case <-ctx.Done():
		err = ctx.Err()
	case <-wait.C:
		err = fmt.Errorf("no samples within %s", c.First)
	}
	if err != nil {
		return nil, errors.Join(fmt.Errorf("acq/exec: %s: %w", c.Command[0], err), s.Close())
	}
	return s, nil
}

// Info describes the source.
func (s *Source) Info() acq.Info { return s.info }

// Stats gives a picture of now.
func (s *Source) Stats() Stats {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.stats
}

// Read gives the next block as soon as it has come.
func (s *Source) Read(ctx context.Context, b *acq.Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	select {
	case <-s.closed:
		return ErrClosed
	default:
	}
	select {
	case <-ctx.Done():
		return ctx.Err()
	case <-s.closed:
		return ErrClosed
	case p, ok := <-s.blocks:
		if !ok {
			return s.ended
		}
		*b = *p
		return nil
	}
}

// Close ends the program and everything else; a second call does nothing.
func (s *Source) Close() error {
	s.closeOnce.Do(func() {
		close(s.closed)
		s.stop()
		<-s.over
	})
	return nil
}

// feed runs the program again and again, and is the only one that writes to blocks.
func (s *Source) feed(ctx context.Context) {
	defer close(s.over)
	pause := firstPause
	for {
		began := s.c.Clock.Now()
		err := s.once(ctx)
		if ctx.Err() != nil {
			s.end(ErrClosed)
			return
		}
		if err == nil && s.c.Once {
			s.end(io.EOF)
			return
		}
		said := "it ended"
		if err != nil {
			said = err.Error()
		}
		s.count(func(st *Stats) { st.LastError = said; st.LastAt = s.c.Clock.Now() })
		if !s.begun { // a program that gives nothing at its first start is a mistake in the configuration
			s.ready <- fmt.Errorf("no block of samples: %s", said)
			s.end(ErrClosed)
			return
		}
		if s.c.Clock.Now().Sub(began) > steady {
			pause = firstPause
		}
		s.c.Log.Warn("acquisition: the capture program is started anew", "program", s.c.Command[0], "err", said, "again_in", pause)
		s.note = "capture program started anew: " + said
		if s.c.Clock.Sleep(ctx, pause) != nil {
			s.end(ErrClosed)
			return
		}
		pause = min(2*pause, longPause)
	}
}

func (s *Source) end(why error) {
	s.ended = why
	close(s.blocks)
}

func (s *Source) count(f func(*Stats)) {
	s.mu.Lock()
	defer s.mu.Unlock()
	f(&s.stats)
}

// take passes one block on. anew says that it is the first since the program was started.
func (s *Source) take(ctx context.Context, raw []byte, anew bool) {
	n := len(raw) / (s.format.size * s.c.Channels)
	now := s.c.Clock.Now()
	switch {
	case !s.begun:
		s.info.Start = s.time.begin(now, n)
	case anew:
		s.lose(s.time.resume(now, s.next, n), s.note)
	default:
		if k := s.time.see(now, s.next+int64(n)); k > 0 {
			s.count(func(st *Stats) { st.Short++ })
			s.lose(k, fmt.Sprintf("about %d samples went missing in the capture program or before it", k))
		}
	}
	b := &acq.Block{Seq0: s.next, N: n, Lost: s.lost, Counts: make([][]int32, s.c.Channels)}
	if s.lost > 0 {
		b.Note = s.note
	}
	flat := make([]int32, n*s.c.Channels)
	for c := range b.Counts {
		b.Counts[c] = flat[c*n : (c+1)*n : (c+1)*n]
	}
	s.format.unpack(raw, b.Counts)
	s.next += int64(n)
	if s.c.Once {
		select {
		case s.blocks <- b:
		case <-ctx.Done():
		}
		s.lost = 0
	} else {
		select {
		case s.blocks <- b:
			s.lost = 0
		default:
			s.count(func(st *Stats) { st.Full++; st.Lost += int64(n); st.LastAt = now })
			s.lost += int64(n)
			s.note = "blocks were not taken in time"
		}
	}
	if !s.begun {
		s.begun = true
		s.ready <- nil
	}
	if ppm, ok := s.time.drift(); ok {
		s.count(func(st *Stats) { st.DriftPPM = ppm })
	}
}

func (s *Source) lose(k int64, note string) {
	if k <= 0 {
		return
	}
	s.next += k
	s.lost += k
	s.note = note
	s.count(func(st *Stats) { st.Lost += k; st.LastAt = s.c.Clock.Now() })
}
