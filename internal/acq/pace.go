package acq

import (
	"context"
	"fmt"
	"math"
	"time"
)

// Clock is the wall a paced source is held against; tests inject their own.
type Clock interface {
	Now() time.Time
	// Sleep waits for d or until ctx is done, and then gives ctx's error.
	Sleep(ctx context.Context, d time.Duration) error
}

// WallClock is the machine's own clock.
type WallClock struct{}

// Now gives the present time.
func (WallClock) Now() time.Time { return time.Now() }

// Sleep waits for d or until ctx is done.
func (WallClock) Sleep(ctx context.Context, d time.Duration) error {
	if d <= 0 {
		return ctx.Err()
	}
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// Paced gives the blocks of src no sooner than a converter would: a block comes when its last sample has been
// taken, counted from the first Read. The waits are to absolute instants, so they do not add up to a drift; a
// receiver that falls behind gets the blocks it missed at once.
func Paced(src Source, clock Clock) Source {
	s, err := PacedBy(src, clock, 1)
	if err != nil {
		panic(err) // 1 is always a valid pace
	}
	return s
}

// PacedBy is Paced at a multiple of real time: 10 plays ten seconds of samples in one. The factor must be finite
// and > 0.
func PacedBy(src Source, clock Clock, factor float64) (Source, error) {
	if !(factor > 0) || math.IsInf(factor, 0) {
		return nil, fmt.Errorf("acq: pace %v: want a finite factor > 0", factor)
	}
	return &paced{src: src, clock: clock, rate: src.Info().Rate * factor}, nil
}

type paced struct {
	src     Source
	clock   Clock
	rate    float64 // samples per second of wall time
	begun   bool
	t0      time.Time // instant of sample number seq0
	seq0    int64
	held    Block // read, but its time had not come when the caller's context ended
	holding bool
}

func (p *paced) Info() Info { return p.src.Info() }

func (p *paced) Close() error { return p.src.Close() }

func (p *paced) Read(ctx context.Context, b *Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	if !p.begun {
		p.t0 = p.clock.Now()
	}
	if !p.holding {
		if err := p.src.Read(ctx, &p.held); err != nil {
			return err
		}
		p.holding = true
	}
	if !p.begun {
		p.begun, p.seq0 = true, p.held.Seq0
	}
	due := p.t0.Add(time.Duration(float64(p.held.Seq0+int64(p.held.N)-p.seq0) / p.rate * float64(time.Second)))
	if d := due.Sub(p.clock.Now()); d > 0 {
		if err := p.clock.Sleep(ctx, d); err != nil {
			return err // the block stays held: a cancelled wait loses no samples
		}
	}
	*b = p.held
	p.holding = false
	return nil
}
