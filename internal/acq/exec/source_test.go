package exec

import (
	"bytes"
	"context"
	"errors"
	"io"
	"log/slog"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// hands is a clock that goes only while somebody sleeps. After so many sleeps the next one lasts until it is cancelled.
type hands struct {
	mu     sync.Mutex
	now    time.Time
	left   int
	asleep chan struct{} // gets one token when no sleep is left
}

func newHands(sleeps int) *hands {
	return &hands{now: time.Unix(1e9, 0), left: sleeps, asleep: make(chan struct{}, 1)}
}

func (h *hands) Now() time.Time {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.now
}

func (h *hands) Sleep(ctx context.Context, d time.Duration) error {
	h.mu.Lock()
	if h.left > 0 {
		h.left--
		h.now = h.now.Add(d)
		h.mu.Unlock()
		return ctx.Err()
	}
	h.mu.Unlock()
	h.asleep <- struct{}{}
	<-ctx.Done()
	return ctx.Err()
}

func opened(t *testing.T, c Config) *Source {
	t.Helper()
	s, err := Open(t.Context(), c)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	})
	return s
}

func next(t *testing.T, s *Source) acq.Block {
	t.Helper()
	var b acq.Block
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	if err := s.Read(ctx, &b); err != nil {
		t.Fatal(err)
	}
	return b
}

func TestConforms(t *testing.T) {
	c := program(t, "frames:2050 exit:0") // the last block is short
	c.Once = true
	acqtest.Run(t, func(t *testing.T) acq.Source {
		s, err := Open(t.Context(), c)
		if err != nil {
			t.Fatal(err)
		}
		return s
	})
}

// What the program wrote is what comes, frame by frame; half a frame at its end is no sample, and counted.
func TestWhatTheProgramWrites(t *testing.T) {
	c := program(t, "frames:1234 bytes:3 exit:0")
	c.Once = true
	s := opened(t, c)
	blocks, err := acqtest.Drain(s)
	if err != nil {
		t.Fatal(err)
	}
	x := acqtest.Join(blocks)
	if len(x.Seq) != 1234 {
		t.Fatalf("%d frames of 1234", len(x.Seq))
	}
	for i := range x.Seq {
		if x.Seq[i] != int64(i) || x.Counts[0][i] != int32(i) || x.Counts[1][i] != int32(-i) {
			t.Fatalf("frame %d: number %d, %d %d", i, x.Seq[i], x.Counts[0][i], x.Counts[1][i])
		}
	}
	if st := s.Stats(); st.Partial != 1 || st.Lost != 0 || st.Starts != 1 {
		t.Errorf("%+v", st)
	}
}

// A program that dies is started anew after a pause, and the pause is missing in the count: what it was about stands in the
// next block. 0.5 s at 10 kHz are 5000 samples, of which 2000 had come at once.
func TestProgramDies(t *testing.T) {
	var log bytes.Buffer
	c := program(t, "frames:2000 say:overrun!!!_(at_least_12_ms) say:device_gone exit:3")
	clock := newHands(2)
	c.Clock, c.Log = clock, slog.New(slog.NewTextHandler(&log, nil))
	s := opened(t, c)
	<-clock.asleep // three starts, two pauses: 0.5 s and 1 s
	if want := time.Unix(1e9, 0).Add(-20 * time.Millisecond); !s.Info().Start.Equal(want) {
		t.Errorf("the first sample was taken at %s, want %s", s.Info().Start, want)
	}
	var blocks []acq.Block
	for range 30 {
		blocks = append(blocks, next(t, s))
	}
	for i, b := range blocks {
		var lost int64
		seq := int64(i * 200)
		switch {
		case i == 10:
			lost = 5000 - 2000
		case i == 20:
			lost = 10000 - 2000
		}
		if i >= 10 {
			seq += 3000
		}
		if i >= 20 {
			seq += 8000
		}
		if b.Seq0 != seq || b.Lost != lost || (b.Note != "") != (lost > 0) || lost > 0 && !(strings.Contains(b.Note, "exit status 3") && strings.Contains(b.Note, "device gone")) {
			t.Errorf("block %d: sample %d, %d lost, %q; want %d, %d", i, b.Seq0, b.Lost, b.Note, seq, lost)
		}
	}
	if st := s.Stats(); st.Starts != 3 || st.Lost != 11000 || st.Overruns != 3 || !st.LastAt.Equal(time.Unix(1e9, 0).Add(1500*time.Millisecond)) || !strings.Contains(st.LastError, "exit status 3") {
		t.Errorf("%+v", st)
	}
	if err := s.Close(); err != nil {
		t.Error(err)
	}
	if said := log.String(); strings.Count(said, "says=\"overrun!!!") != 3 || strings.Count(said, "started anew") != 3 {
		t.Errorf("the log says:\n%s", said)
	}
}

// What a program says on standard error is logged, cut where it is too much: a log that is full of it holds nothing else.
func TestProgramTalks(t *testing.T) {
	var log bytes.Buffer
	c := program(t, "say:"+strings.Repeat("x", 3000)+strings.Repeat(" say:tick", 300)+" frames:200 exit:0")
	c.Once, c.Clock, c.Log = true, newHands(0), slog.New(slog.NewTextHandler(&log, nil))
	s := opened(t, c)
	if _, err := acqtest.Drain(s); err != nil {
		t.Fatal(err)
	}
	said := log.String()
	if strings.Count(said, "says=tick") != chatter-1 || !strings.Contains(said, "lines=281") || strings.Contains(said, strings.Repeat("x", longLine+1)) || !strings.Contains(said, strings.Repeat("x", 400)) {
		t.Errorf("the log says:\n%s", said)
	}
}

// A program that goes on without giving anything is ended and started anew, also when it does not listen to SIGTERM.
func TestProgramStalls(t *testing.T) {
	for _, plan := range []string{"frames:200 hang", "deaf frames:200 hang"} {
		c := program(t, plan)
		c.Stall, c.grace, c.Clock = 50*time.Millisecond, 50*time.Millisecond, newHands(1)
		s := opened(t, c)
		if b := next(t, s); b.Seq0 != 0 || b.N != 200 {
			t.Fatalf("%+v", b)
		}
		b := next(t, s)
		if b.Lost != 5000-200 || !strings.Contains(b.Note, "no samples for 50ms") {
			t.Errorf("%s: %d lost, %q", plan, b.Lost, b.Note)
		}
		if err := s.Close(); err != nil {
			t.Error(err)
		}
		if st := s.Stats(); st.Stalls < 1 || st.Starts < 2 {
			t.Errorf("%s: %+v", plan, st)
		}
	}
}

// Samples that nobody takes are dropped and counted; the blocks that follow say so.
func TestNobodyReads(t *testing.T) {
	const blocks = 300 // the queue holds 250
	c := program(t, "frames:60000 exit:1")
	clock := newHands(1)
	c.Clock = clock
	s := opened(t, c)
	<-clock.asleep // two starts, nothing read
	st := s.Stats()
	if st.Full != 2*blocks-250 {
		t.Errorf("%d blocks dropped", st.Full)
	}
	var end int64
	for range 250 {
		b := next(t, s)
		if b.Seq0-b.Lost != end {
			t.Fatalf("sample %d (%d lost) after %d", b.Seq0, b.Lost, end)
		}
		end = b.Seq0 + int64(b.N)
	}
	if end != 250*200 {
		t.Errorf("the queue ends at sample %d", end)
	}
}

func TestOpenRefuses(t *testing.T) {
	good := program(t, "say:no_such_device exit:1")
	for name, c := range map[string]struct {
		set  func(*Config)
		want string
	}{
		"nothing comes":   {func(*Config) {}, "no such device"},
		"no such program": {func(c *Config) { c.Command = []string{"lapwing-no-such-program"} }, "lapwing-no-such-program"},
		"no program":      {func(c *Config) { c.Command = nil }, "no program"},
		"format":          {func(c *Config) { c.Format = "float" }, "s16_be, s16_le"},
		"channels":        {func(c *Config) { c.Channels = 0 }, "channels 0"},
		"rate":            {func(c *Config) { c.Rate = 0 }, "rate 0"},
		"bits":            {func(c *Config) { c.Bits = 17 }, "bits 17"},
	} {
		k := good
		c.set(&k)
		if _, err := Open(t.Context(), k); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", name, err, c.want)
		}
	}
	t.Setenv("LAPWING_CAPTURE", "hang")
	good.First, good.grace = 50*time.Millisecond, 50*time.Millisecond
	if _, err := Open(t.Context(), good); err == nil || !strings.Contains(err.Error(), "50ms") {
		t.Errorf("a program that gives nothing: %v", err)
	}
	good.First = time.Minute
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Open(ctx, good); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
}

// A program that ends well is the end only where that was asked for.
func TestOnceOnlyWhereAsked(t *testing.T) {
	c := program(t, "only:"+filepath.Join(t.TempDir(), "begun")+" frames:400 exit:0")
	clock := newHands(1)
	c.Clock = clock
	s := opened(t, c)
	<-clock.asleep
	if st := s.Stats(); st.Starts != 2 {
		t.Errorf("%+v", st)
	}
	next(t, s)
	next(t, s)
	if err := s.Close(); err != nil {
		t.Error(err)
	}
	var b acq.Block
	if err := s.Read(t.Context(), &b); !errors.Is(err, ErrClosed) || errors.Is(err, io.EOF) {
		t.Error(err)
	}
}
