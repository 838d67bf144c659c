package acqtest

import (
	"context"
	"errors"
	"io"
	"testing"
	"time"

	"lapwing/internal/acq"
)

// promptly is how long a cancelled Read may take: generous, for a busy machine; a source that ignores its context
// takes for ever.
const promptly = 10 * time.Second

// maxReads bounds the suite on a source that never ends.
const maxReads = 1 << 20

// Run holds a source to the contract of acq.Source. open gives a fresh one each time; it must end by itself and give
// at least one block.
func Run(t *testing.T, open func(t *testing.T) acq.Source) {
	t.Helper()
	t.Run("info says what the blocks hold", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		in := s.Info()
		if !(in.Rate > 0) || in.Channels < 1 || in.Bits < 2 || in.Bits > 32 {
			t.Fatalf("info %+v: want rate > 0, channels > 0, bits 2..32", in)
		}
		lo, hi := -(int64(1) << (in.Bits - 1)), int64(1)<<(in.Bits-1)-1
		n := 0
		for _, b := range drain(t, s) {
			for c, x := range b.Counts {
				for i, v := range x {
					if int64(v) < lo || int64(v) > hi {
						t.Fatalf("input %d, sample %d: code %d does not fit %d bits", c, b.Seq0+int64(i), v, in.Bits)
					}
				}
			}
			n += b.N
		}
		if n == 0 {
			t.Fatal("no samples at all")
		}
		if s.Info() != in {
			t.Errorf("info changed while open: %+v, was %+v", s.Info(), in)
		}
	})
	t.Run("lengths agree", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		for i, b := range drain(t, s) {
			if len(b.Counts) != s.Info().Channels {
				t.Fatalf("block %d: %d inputs, info says %d", i, len(b.Counts), s.Info().Channels)
			}
			for c, x := range b.Counts {
				if len(x) != b.N {
					t.Fatalf("block %d: input %d has %d samples, N is %d", i, c, len(x), b.N)
				}
			}
		}
	})
	t.Run("sequence has no unexplained holes", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		blocks := drain(t, s)
		for i, b := range blocks {
			if b.Lost < 0 || b.N < 0 {
				t.Fatalf("block %d: N %d, Lost %d", i, b.N, b.Lost)
			}
			if b.Lost > 0 && b.Note == "" {
				t.Errorf("block %d: %d samples lost and no note says why", i, b.Lost)
			}
			if b.Clip && b.Note == "" {
				t.Errorf("block %d: clipped and no note says why", i)
			}
			if i > 0 {
				p := blocks[i-1]
				if want := p.Seq0 + int64(p.N) + b.Lost; b.Seq0 != want {
					t.Fatalf("block %d begins at sample %d, want %d (%d lost)", i, b.Seq0, want, b.Lost)
				}
			}
		}
	})
	t.Run("the end is sticky", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		drain(t, s)
		var b acq.Block
		for range 3 {
			if err := s.Read(context.Background(), &b); !errors.Is(err, io.EOF) {
				t.Fatalf("read after the end: %v, want io.EOF", err)
			}
		}
	})
	t.Run("cancel returns promptly and loses nothing", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		var b acq.Block
		if err := s.Read(context.Background(), &b); err != nil {
			t.Fatal(err)
		}
		next := b.Seq0 + int64(b.N)
		ctx, cancel := context.WithCancel(context.Background())
		cancel()
		done := make(chan error, 1)
		go func() {
			var b acq.Block
			done <- s.Read(ctx, &b)
		}()
		select {
		case err := <-done:
			if !errors.Is(err, context.Canceled) {
				t.Fatalf("read with a cancelled context: %v, want context.Canceled", err)
			}
		case <-time.After(promptly):
			t.Fatal("read did not return after cancel")
		}
		switch err := s.Read(context.Background(), &b); {
		case errors.Is(err, io.EOF): // the source had one block
		case err != nil:
			t.Fatal(err)
		case b.Seq0-b.Lost != next:
			t.Errorf("after the cancelled read: sample %d (%d lost), want %d", b.Seq0, b.Lost, next)
		}
	})
	t.Run("the same again", func(t *testing.T) {
		s := open(t)
		defer closeOK(t, s)
		r := open(t)
		defer closeOK(t, r)
		if d := Differ(Join(drain(t, s)), Join(drain(t, r))); d != "" {
			t.Errorf("two openings differ: %s", d)
		}
	})
	t.Run("close twice is harmless", func(t *testing.T) {
		s := open(t)
		closeOK(t, s)
		closeOK(t, s)
		var b acq.Block
		if err := s.Read(context.Background(), &b); err == nil {
			t.Error("read after close succeeded")
		}
	})
}

func closeOK(t *testing.T, s acq.Source) {
	t.Helper()
	if err := s.Close(); err != nil {
		t.Errorf("close: %v", err)
	}
}

func drain(t *testing.T, s acq.Source) []acq.Block {
	t.Helper()
	blocks, err := Drain(s)
	if err != nil {
		t.Fatal(err)
	}
	return blocks
}

// Drain reads a source to its end and gives copies of all its blocks; any error but io.EOF is returned with what
// came before it.
func Drain(s acq.Source) ([]acq.Block, error) {
	var out []acq.Block
	for range maxReads {
		var b acq.Block
		if err := s.Read(context.Background(), &b); errors.Is(err, io.EOF) {
			return out, nil
		} else if err != nil {
			return out, err
		}
		c := b
		c.Counts = make([][]int32, len(b.Counts))
		for i, x := range b.Counts {
			c.Counts[i] = append([]int32(nil), x...)
		}
		out = append(out, c)
	}
	return out, errors.New("acqtest: the source does not end")
}
