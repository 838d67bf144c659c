// Package acq says what a source of samples is: multi-channel integer counts with a sample clock.
//
// A source is read by one goroutine. Gaps and overruns are visible in every block, never papered over:
// the sample number of a block's first sample counts what was lost before it.
package acq

import (
	"context"
	"time"
)

// Info describes a source; it does not change while the source is open.
type Info struct {
	Rate     float64   // samples per second and channel, > 0
	Channels int       // number of inputs, > 0; input i is Counts[i] of every block
	Bits     int       // width of the converter's codes: full scale is ±2^(Bits-1); 2..32
	Start    time.Time // UTC of sample number 0; zero when the source does not know
	Name     string    // what it is, for people: a file name, a device
}

// Block is a stretch of samples of all inputs. The receiver of Read owns nothing in it: slices are reused by
// the next Read, so copy what must live longer.
type Block struct {
	Seq0   int64     // sample number (source clock, counts lost samples too) of the first sample
	N      int       // samples per channel; every Counts[i] has this length
	Counts [][]int32 // one slice per input, raw converter codes, sign-extended
	Lost   int64     // samples missing immediately before Seq0 (already counted in Seq0)
	Clip   bool      // the source reported an overrun or converter overload inside this block
	Note   string    // why, when Lost or Clip is set
}

// Source gives blocks until io.EOF. After any error other than io.EOF the caller may stop or, when the error says
// it is retryable, read again. EOF is sticky. Read returns soon after ctx is cancelled, with ctx's error.
type Source interface {
	Info() Info
	Read(ctx context.Context, b *Block) error
	Close() error
}
