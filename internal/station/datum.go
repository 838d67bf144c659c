package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"slices"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/frame"
	"lapwing/internal/passage"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// DatumOptions say which recording of a healthy machine to estimate dead centres, clearances and zeros from.
type DatumOptions struct {
	SkidFile, Recording, ProcessCSV string
	Out                             io.Writer
}

// Datum runs the line on a recording, gathers the mean turn of each throw at each duty, and writes what they say of dead
// centre, clearances, pressure zeros and gauge passages, beside what the skid file says. It changes nothing. Where a
// passage is found that the file does not have, the recording is gone through once more with that passage undone. That no
// throw could be estimated is an error.
func Datum(ctx context.Context, o DatumOptions) error {
	sk, err := skid.Load(o.SkidFile)
	if err != nil {
		return err
	}
	if err := checkMachine(sk); err != nil {
		return err
	}
	g, err := gather(ctx, sk, o)
	if g == nil {
		return err
	}
	found := g.passages()
	if with := undoing(sk, found); with != nil {
		if g, err = gather(ctx, with, o); g == nil {
			return err
		}
	}
	return errors.Join(g.report(o.Out, filepath.Base(o.Recording), sk, found), err)
}

// gather goes through a recording. A damaged one is used as far as it goes: there may be both a gathering and an error.
func gather(ctx context.Context, sk *skid.Skid, o DatumOptions) (*gathering, error) {
	src, err := wav.Open(o.Recording, wav.Options{})
	if err != nil {
		return nil, err
	}
	defer src.Close()
	if n := inputs(sk); src.Info().Channels < n {
		return nil, fmt.Errorf("datum: %s has %d channels, the skid file uses input %d (inputs count from 0)", o.Recording, src.Info().Channels, n-1)
	}
	proc := fixed(sk)
	if o.ProcessCSV != "" {
		if proc, err = readProcess(o.ProcessCSV, sk); err != nil {
			return nil, err
		}
	}
	g, err := newGathering(sk, src.Info(), proc.from(firstSecond(src)))
	if err != nil {
		return nil, err
	}
	var b acq.Block
	for err == nil {
		if err = src.Read(ctx, &b); err == nil {
			err = g.add(&b)
		}
	}
	if ctx.Err() != nil {
		return nil, fmt.Errorf("datum: %w", err)
	}
	g.flush()
	if errors.Is(err, io.EOF) {
		return g, nil
	}
	return g, fmt.Errorf("datum: %w", err)
}

// passages looks for the passage of every pressure channel of the throws.
func (g *gathering) passages() (found [][2]passage.Found) {
	for i := range g.throws {
		found = append(found, [2]passage.Found{passage.Find(g.rate, g.throws[i].stretch[0]), passage.Find(g.rate, g.throws[i].stretch[1])})
	}
	return found
}

// undoing gives the machine with the passages that were found and that its file does not have; nil when there are none.
func undoing(sk *skid.Skid, found [][2]passage.Found) *skid.Skid {
	out := *sk
	out.Channels = slices.Clone(sk.Channels)
	any := false
	for i := range found {
		for e := range found[i] {
			f := &found[i][e]
			for k := range out.Channels {
				c := &out.Channels[k]
				if f.Valid() && c.ID == sk.Throws[i].Ends[e].Pressure && c.Passage == 0 {
					c.Passage, c.PassageQ, any = f.Hz, f.Q, true
				}
			}
		}
	}
	if !any {
		return nil
	}
	return &out
}

// walk passes a block through frame, turn and window as Add does, and gives every turn with its windows. It leaves
// measuring and judging out.
func (l *Line) walk(b *acq.Block, each func(*turn.Turn, window.Result)) error {
	return l.frames.Add(b, func(f *frame.Frame) { l.turns.Add(f, func(t *turn.Turn) { l.walked(t, each) }) })
}

func (l *Line) walked(t *turn.Turn, each func(*turn.Turn, window.Result)) {
	proc := l.proc(t.Time)
	l.prepare(t, proc)
	if l.uneven != nil && t.Valid() {
		for i := range l.behind {
			l.behind[i] = l.win[i].LinePs
		}
		l.uneven.Learn(t, l.behind)
	}
	w := l.windows.Track(t, l.win)
	for i := range l.points {
		l.points[i] = l.classify(i, t, proc, w)
	}
	if t.Valid() {
		l.refine(w)
	}
	each(t, w)
}
