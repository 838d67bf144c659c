// Package model is a source of samples that come from a modelled machine instead of a converter.
//
// It needs: a skid and a script of what happens.
// It waits: never; blocks come as fast as they can be computed (acq paces them when real time is wanted).
// It emits: blocks of raw counts, and on request the process values and the truth behind the samples.
// When it cannot: Open says why; Read ends with io.EOF after the stated duration, or with the context's error.
package model

import (
	"context"
	"errors"
	"fmt"
	"io"
	"sync"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// DefaultBlock is the block length in seconds when Options.BlockLen is zero.
const DefaultBlock = 0.02

// Options say how the modelled machine is sampled.
type Options struct {
	Seed     uint64
	Rate     float64       // samples per second; 0: the skid's own rate, or model.DefaultRate
	Bits     int           // converter width; 0: 24
	BlockLen int           // samples per block; 0: DefaultBlock
	Duration time.Duration // of the run; 0: without end
	Start    time.Time     // UTC of the first sample; zero: unknown
	Params   *model.Params // nil: model.Typical
}

// Source is a modelled machine as an acq.Source. Read is for one goroutine; Process and Truths may be called from another.
type Source struct {
	mu     sync.Mutex
	m      *model.Machine
	info   acq.Info
	block  int
	left   int64 // samples, negative: without end
	closed bool
}

var _ acq.Source = (*Source)(nil)

// ErrClosed is given by Read after Close.
var ErrClosed = errors.New("acq/model: source is closed")

// Open builds the machine.
func Open(sk *skid.Skid, s model.Script, o Options) (*Source, error) {
	if o.Rate == 0 {
		o.Rate = sk.Rate
	}
	if o.Duration < 0 || o.BlockLen < 0 {
		return nil, fmt.Errorf("acq/model: duration %s and block length %d must not be negative", o.Duration, o.BlockLen)
	}
	m, err := model.New(sk, s, model.Options{Seed: o.Seed, Rate: o.Rate, Bits: o.Bits, Params: o.Params})
	if err != nil {
		return nil, fmt.Errorf("acq/model: %w", err)
	}
	src := &Source{m: m, info: m.Info(), block: o.BlockLen, left: -1}
	src.info.Start = o.Start
	if src.block == 0 {
		src.block = max(1, int(DefaultBlock*src.info.Rate))
	}
	if o.Duration > 0 {
		src.left = int64(o.Duration.Seconds() * src.info.Rate)
	}
	return src, nil
}

// Info describes the source.
func (s *Source) Info() acq.Info { return s.info }

// Read computes the next block.
func (s *Source) Read(ctx context.Context, b *acq.Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return ErrClosed
	}
	n := s.block
	if s.left >= 0 && int64(n) > s.left {
		n = int(s.left)
	}
	if n == 0 {
		return io.EOF
	}
	s.m.Fill(b, n)
	if s.left > 0 {
		s.left -= int64(n)
	}
	return nil
}

// Close ends the source; a second call does nothing.
func (s *Source) Close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.closed = true
	return nil
}

// Process gives the process values known at t seconds after the first sample.
func (s *Source) Process(t float64) skid.Process {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.m.Process(t)
}

// Truths drains the truths completed so far.
func (s *Source) Truths() []model.Truth {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.m.Truths()
}
