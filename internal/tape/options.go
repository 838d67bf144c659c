package tape

import (
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"time"

	"lapwing/internal/acq"
)

const layoutVersion = 1

// Options of a tape. The zero value of a field means its default.
type Options struct {
	Info acq.Info // the source: rate, inputs, width of its codes, UTC of sample 0 if known
	Skid []byte   // the skid file in force, kept once by its hash; may be empty

	MaxBytes  int64         // bound of the ring's file; default 4 GiB
	MaxAge    time.Duration // oldest segment kept, counted back from the newest; default: no bound
	Thin      Thinning      // keeps less of what is older; default: all of it until it rolls away
	Reserve   bool          // take MaxBytes on the disk at once, so that others who fill it cannot starve the ring
	ClipBytes int64         // bound of the clips' file; default MaxBytes/4
	ClipsPath string        // default: clips.db beside the ring
	ClipSpan  time.Duration // overlapping clips are merged up to this length; default 10 min

	Segment time.Duration // samples of one commit; default 1 s
	Queue   time.Duration // samples that may wait for the disk before the oldest are dropped; default 4 s

	LockWait time.Duration // for another process that holds a file; default 2 s

	disk   func(kind string) error // tests: called before each commit, to make the disk slow or full
	noSync bool                    // tests of what is kept, not of whether it is kept: no waiting for the disk
}

func (o Options) withDefaults(path string) (Options, error) {
	if o.MaxBytes == 0 {
		o.MaxBytes = 4 << 30
	}
	if o.ClipBytes == 0 {
		o.ClipBytes = o.MaxBytes / 4
	}
	if o.ClipsPath == "" {
		o.ClipsPath = filepath.Join(filepath.Dir(path), "clips.db")
	}
	if o.ClipSpan == 0 {
		o.ClipSpan = 10 * time.Minute
	}
	if o.Segment == 0 {
		o.Segment = time.Second
	}
	if o.Queue == 0 {
		o.Queue = 4 * time.Second
	}
	var errs []error
	bad := func(format string, args ...any) { errs = append(errs, fmt.Errorf("tape: options: "+format, args...)) }
	if !(o.Info.Rate > 0) || math.IsInf(o.Info.Rate, 0) {
		bad("rate %g samples/s is not above zero", o.Info.Rate)
	}
	if o.Info.Channels < 1 || o.Info.Channels > math.MaxUint16 {
		bad("%d inputs", o.Info.Channels)
	}
	if o.Info.Bits < 2 || o.Info.Bits > 32 {
		bad("codes of %d bits; 2 to 32 are possible", o.Info.Bits)
	}
	if o.Segment < 0 || o.Queue < 0 || o.MaxAge < 0 || o.ClipSpan < 0 {
		bad("a duration is negative")
	}
	if err := o.Thin.check(); err != nil {
		errs = append(errs, err)
	}
	if filepath.Clean(o.ClipsPath) == filepath.Clean(path) {
		bad("ring and clips are both %s", path)
	}
	if len(errs) == 0 {
		n := o.segmentSamples()
		if n > maxSamples {
			bad("a segment of %d samples; at most %d", n, maxSamples)
		}
		// Eight segments that do not compress: fewer is no ring.
		least := 8*int64(n)*int64(o.Info.Channels)*int64((o.Info.Bits+7)/8) + 1<<20
		if o.MaxBytes < least {
			bad("%d bytes are too few for %d inputs at %g/s: at least %d", o.MaxBytes, o.Info.Channels, o.Info.Rate, least)
		}
		if o.ClipBytes < least {
			bad("%d bytes of clips are too few for %d inputs at %g/s: at least %d", o.ClipBytes, o.Info.Channels, o.Info.Rate, least)
		}
	}
	return o, errors.Join(errs...)
}

func (o *Options) segmentSamples() int {
	return max(1, int(math.Round(o.Info.Rate*o.Segment.Seconds())))
}

// samples is a duration in samples of the source.
func (o *Options) samples(d time.Duration) int64 { return int64(o.Info.Rate * d.Seconds()) }
