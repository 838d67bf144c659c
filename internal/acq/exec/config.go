package exec

import (
	"errors"
	"fmt"
	"log/slog"
	"math"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/acq"
)

// Config says what to run and what it writes.
type Config struct {
	Command  []string // program and arguments; no shell comes between
	Format   string   // s16_le, s24_le, s24_3le, s32_le or their _be forms
	Channels int
	Rate     float64 // samples a second, per channel
	Bits     int     // significant ones, the topmost of the format; 0: all
	Once     bool    // the program's end with exit status 0 is the end of the source; nothing is dropped meanwhile
	Log      *slog.Logger
	Clock    acq.Clock     // nil: the machine's
	First    time.Duration // the longest wait for the first block of each start; 0: 10 s
	Stall    time.Duration // without a further block the program is started anew; 0: 5 s

	grace time.Duration // for a program that was asked to end; 0: 2 s
}

// Help explains source strings.
const Help = "exec:format=s24_3le,channels=8,rate=51200:PROGRAM ARGUMENT…"

// Parse reads a source string without its "exec:", see Help. rate is taken where the string states none. Arguments are
// parted at blanks; where one holds a blank, run a script.
func Parse(s string, rate float64) (Config, error) {
	c := Config{Rate: rate}
	head, command, ok := strings.Cut(s, ":")
	if c.Command = strings.Fields(command); !ok || len(c.Command) == 0 {
		return c, fmt.Errorf("acq/exec: no program: write %s", Help)
	}
	for part := range strings.SplitSeq(head, ",") {
		key, v, _ := strings.Cut(part, "=")
		var err error
		switch key {
		case "format":
			c.Format = strings.ToLower(v)
		case "channels":
			c.Channels, err = strconv.Atoi(v)
		case "bits":
			c.Bits, err = strconv.Atoi(v)
		case "rate":
			c.Rate, err = strconv.ParseFloat(v, 64)
		case "once":
			if c.Once = true; v != "" {
				err = errors.New("takes no value")
			}
		default:
			err = errors.New("not known; there are format, channels, rate, bits, once")
		}
		if err != nil {
			return c, fmt.Errorf("acq/exec: %q: %w", part, err)
		}
	}
	_, err := c.check()
	return c, err
}

// maxChannels and maxRate keep a mistyped number from asking for all memory.
const (
	maxChannels = 1024
	maxRate     = 10e6
)

func (c *Config) check() (format, error) {
	f, ok := formats[c.Format]
	switch {
	case len(c.Command) == 0:
		return f, errors.New("acq/exec: no program")
	case !ok:
		return f, fmt.Errorf("acq/exec: format %q: there are %s", c.Format, formatNames())
	case c.Channels < 1 || c.Channels > maxChannels:
		return f, fmt.Errorf("acq/exec: channels %d: want 1 to %d", c.Channels, maxChannels)
	case !(c.Rate > 0) || c.Rate > maxRate || math.IsInf(c.Rate, 0):
		return f, fmt.Errorf("acq/exec: rate %v: want more than 0 and up to %v samples a second", c.Rate, float64(maxRate))
	case c.Bits != 0 && (c.Bits < 2 || c.Bits > f.bits):
		return f, fmt.Errorf("acq/exec: bits %d: %s has 2 to %d", c.Bits, c.Format, f.bits)
	}
	if c.Bits != 0 {
		f.bits = c.Bits
	}
	return f, nil
}
