package acq_test

import (
	"context"
	"errors"
	"math"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// handClock moves only when somebody sleeps on it or turns it.
type handClock struct {
	now   time.Time
	slept []time.Duration
	fail  error
}

func (c *handClock) Now() time.Time { return c.now }

func (c *handClock) Sleep(ctx context.Context, d time.Duration) error {
	if c.fail != nil {
		return c.fail
	}
	c.slept = append(c.slept, d)
	c.now = c.now.Add(d)
	return ctx.Err()
}

func ramp(n int) [][]int32 {
	x := make([]int32, n)
	for i := range x {
		x[i] = int32(i)
	}
	return [][]int32{x}
}

var info = acq.Info{Rate: 1000, Channels: 1, Bits: 16, Name: "ramp"}

func TestPacedHoldsBlocksBack(t *testing.T) {
	clock := &handClock{now: time.Unix(100, 0)}
	src := acq.Paced(acqtest.FromCounts(info, ramp(400), 100), clock)
	var b acq.Block
	read := func(want time.Duration) {
		t.Helper()
		if err := src.Read(t.Context(), &b); err != nil {
			t.Fatal(err)
		}
		if got := clock.now.Sub(time.Unix(100, 0)); got != want {
			t.Errorf("block at sample %d came at %v, want %v", b.Seq0, got, want)
		}
	}
	read(100 * time.Millisecond)
	clock.now = clock.now.Add(150 * time.Millisecond) // the receiver was slow: the next is due already
	read(250 * time.Millisecond)
	read(300 * time.Millisecond) // and the pace has not drifted
	read(400 * time.Millisecond)
}

func TestPacedByAMultiple(t *testing.T) {
	clock := &handClock{now: time.Unix(100, 0)}
	src, err := acq.PacedBy(acqtest.FromCounts(info, ramp(400), 100), clock, 10)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := acqtest.Drain(src); err != nil {
		t.Fatal(err)
	}
	if got := clock.now.Sub(time.Unix(100, 0)); got != 40*time.Millisecond {
		t.Errorf("0.4 s of samples ten times as fast took %v, want 40ms", got)
	}
	for _, f := range []float64{0, -1, math.NaN(), math.Inf(1)} {
		if _, err := acq.PacedBy(src, clock, f); err == nil {
			t.Errorf("pace %v was accepted", f)
		}
	}
}

func TestPacedLosesNothingWhenCancelled(t *testing.T) {
	clock := &handClock{now: time.Unix(100, 0)}
	src := acq.Paced(acqtest.FromCounts(info, ramp(400), 100), clock)
	var b acq.Block
	clock.fail = context.Canceled
	if err := src.Read(t.Context(), &b); !errors.Is(err, context.Canceled) {
		t.Fatal(err)
	}
	clock.fail = nil
	blocks, err := acqtest.Drain(src)
	if err != nil || len(blocks) != 4 || blocks[0].Seq0 != 0 {
		t.Errorf("%d blocks after a cancelled wait, want all 4 (%v)", len(blocks), err)
	}
}

func TestSourcesKeepTheContract(t *testing.T) {
	t.Run("memory", func(t *testing.T) {
		acqtest.Run(t, func(*testing.T) acq.Source { return acqtest.FromCounts(info, ramp(250), 100) })
	})
	t.Run("paced", func(t *testing.T) {
		acqtest.Run(t, func(*testing.T) acq.Source {
			return acq.Paced(acqtest.FromCounts(info, ramp(250), 100), &handClock{})
		})
	})
}

func TestWallClockSleepEndsWithItsContext(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if err := (acq.WallClock{}).Sleep(ctx, time.Hour); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	if err := (acq.WallClock{}).Sleep(t.Context(), -1); err != nil {
		t.Error(err)
	}
}
