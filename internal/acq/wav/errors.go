package wav

import (
	"errors"
	"fmt"
)

// ErrFormat is wrapped by every error that says the file is no WAVE file, or not one this package reads.
var ErrFormat = errors.New("not a readable WAVE file")

// TruncatedError ends a recording whose file is shorter than its header says, or that stops inside a sample. All
// whole samples have been given before it. It is sticky: every further Read gives it again.
type TruncatedError struct {
	Name     string
	Got      int64 // samples per channel that were given
	Promised int64 // samples per channel the header promised; -1 when it promised no length
	Tail     int64 // bytes left over at the end that are no whole sample
}

func (e *TruncatedError) Error() string {
	switch {
	case e.Promised < 0:
		return fmt.Sprintf("wav: %s: stops inside a sample: %d whole samples per channel given, %d bytes left over",
			e.Name, e.Got, e.Tail)
	case e.Got >= e.Promised:
		return fmt.Sprintf("wav: %s: the data are no whole number of samples: %d per channel given, %d bytes left over",
			e.Name, e.Got, e.Tail)
	}
	return fmt.Sprintf("wav: %s: truncated: %d samples per channel given, the header promised %d", e.Name, e.Got, e.Promised)
}

func bad(name, format string, args ...any) error {
	return fmt.Errorf("wav: %s: %w: %s", name, ErrFormat, fmt.Sprintf(format, args...))
}
