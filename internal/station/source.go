package station

import (
	"context"
	"fmt"
	"os"
	"strings"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/exec"
	"lapwing/internal/acq/model"
	"lapwing/internal/acq/wav"
	"lapwing/internal/plant"
	"lapwing/internal/scenario"
	"lapwing/internal/skid"
)

// Scenarios lists the modelled scenarios, for help texts.
func Scenarios() string { return scenario.Help() }

// processAt gives the process values in force at t seconds of sample clock.
type processAt func(t float64) skid.Process

// rowSlack keeps a row that begins at a whole second from being missed by the last bit of a subtraction.
const rowSlack = 1e-6

// from shifts process values that count from a recording's first sample to the sample clock, which shows start there.
// The second that the first sample falls into has what holds at the first sample.
func (p processAt) from(start float64) processAt {
	return func(t float64) skid.Process { return p(max(0, t-start) + rowSlack) }
}

// firstSecond is the sample clock at a recording's first sample, s: clips do not begin at sample 0.
func firstSecond(w *wav.Source) float64 { return float64(w.Meta().Seq0) / w.Info().Rate }

// openSource opens what a source string names, and the process values that go with it. newest is the time of the newest
// entry of the journal: the days of a modelled machine are invented, and played fast they run ahead of the wall clock,
// so a restart goes on after them.
func openSource(o *Options, sk *skid.Skid, newest time.Time) (acq.Source, processAt, error) {
	kind, arg, ok := strings.Cut(o.Source, ":")
	if !ok || arg == "" {
		return nil, nil, fmt.Errorf("station: source %q: write wav:FILE, model:NAME or %s", o.Source, exec.Help)
	}
	var src acq.Source
	var proc processAt
	var start float64
	live := false // it comes at its own pace
	switch kind {
	case "wav":
		w, err := wav.Open(arg, wav.Options{})
		if err != nil {
			return nil, nil, err
		}
		src, proc, start = w, fixed(sk), firstSecond(w)
	case "model":
		run, err := scenario.Get(arg, sk)
		if err != nil {
			return nil, nil, err
		}
		start := o.Start
		if start.IsZero() {
			start = time.Now().UTC().Truncate(time.Second)
			if !start.After(newest) {
				start = newest.UTC().Truncate(time.Second).Add(time.Second)
			}
		}
		m, err := model.Open(sk, run.Script, model.Options{Seed: o.Seed, Duration: time.Duration(run.Duration * float64(time.Second)), Start: start})
		if err != nil {
			return nil, nil, err
		}
		src, proc = m, m.Process
	case "exec":
		c, err := exec.Parse(arg, sk.Rate)
		if err != nil {
			return nil, nil, fmt.Errorf("station: source: %w", err)
		}
		c.Log = o.Log
		x, err := exec.Open(context.Background(), c)
		if err != nil {
			return nil, nil, fmt.Errorf("station: source: %w", err)
		}
		src, proc, live = x, fixed(sk), true
	default:
		return nil, nil, fmt.Errorf("station: source %q: %q is not a kind of source; write wav:FILE, model:NAME or %s", o.Source, kind, exec.Help)
	}
	if o.ProcessCSV != "" {
		p, err := readProcess(o.ProcessCSV, sk)
		if err != nil {
			_ = src.Close()
			return nil, nil, err
		}
		proc = p.from(start)
	}
	if n := inputs(sk); src.Info().Channels < n {
		_ = src.Close()
		return nil, nil, fmt.Errorf("station: source %s has %d channels, the skid file uses input %d (inputs count from 0)", src.Info().Name, src.Info().Channels, n-1)
	}
	if !o.Fast && !live {
		src = acq.Paced(src, acq.WallClock{})
	}
	return src, proc, nil
}

// inputs is how many converter inputs the skid file needs.
func inputs(sk *skid.Skid) int {
	n := 0
	for _, c := range sk.Channels {
		n = max(n, c.Input+1)
	}
	return n
}

func fixed(sk *skid.Skid) processAt { return plant.Fixed(sk).At }

func readProcess(path string, sk *skid.Skid) (processAt, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("station: process values: %w", err)
	}
	defer f.Close()
	s, err := plant.ReadCSV(f, sk)
	if err != nil {
		return nil, fmt.Errorf("station: process values %s: %w", path, err)
	}
	return s.At, nil
}
