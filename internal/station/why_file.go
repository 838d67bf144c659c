package station

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// whyFile writes a review's reasons: a line per turn and throw, and one per block.
type whyFile struct {
	f   *os.File
	w   *bufio.Writer
	err error // the first; nothing is written behind it
}

// tellFrom is how far off a measure of a single turn must be, in spreads, to stand in the file. The blocks have all that
// bears on a hypothesis.
const tellFrom = 2

// keepReasons makes a line write its reasons to a file that is none of the inputs.
func keepReasons(l *Line, path string, inputs ...string) (*whyFile, error) {
	f, err := create(path, inputs...)
	if err != nil {
		return nil, err
	}
	o := &whyFile{f: f, w: bufio.NewWriterSize(f, 1<<16)}
	l.reasons = newReasons(len(l.sk.Throws))
	l.reasons.turn = func(throw int, k *turnReason, layout measure.Layout, devs []duty.Deviation) {
		t := wireTurnReason(l.sk.Throws[throw].ID, k)
		for i := range devs {
			if math.Abs(devs[i].Z) >= tellFrom {
				t.Measures = append(t.Measures, wire.FromDeviation(&devs[i], layout))
			}
		}
		o.put(t)
	}
	l.reasons.block = func(x *verdict.Explanation) { o.put(wire.FromExplanation(x, l.layout, nil, true)) }
	return o, nil
}

func (o *whyFile) put(v any) {
	if o.err != nil {
		return
	}
	b, err := json.Marshal(v)
	if err == nil {
		_, err = o.w.Write(append(b, '\n'))
	}
	o.err = err
}

func (o *whyFile) close() error {
	if err := errors.Join(o.err, o.w.Flush(), o.f.Close()); err != nil {
		return fmt.Errorf("review: reasons: %w", err)
	}
	return nil
}
