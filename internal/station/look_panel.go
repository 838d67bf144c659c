package station

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"lapwing/internal/duty"
	"lapwing/internal/panel"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// Throws lists the throws for the page.
func (s *Station) Throws() []panel.Throw {
	var out []panel.Throw
	for i := range s.sk.Throws {
		th := &s.sk.Throws[i]
		t := panel.Throw{ID: th.ID, Stage: th.Stage, Ends: []string{}, Channels: []string{}}
		for e := range th.Ends {
			if th.Ends[e].Works {
				t.Ends = append(t.Ends, wire.EndNames[e])
			}
			if p := th.Ends[e].Pressure; p != "" {
				t.Channels = append(t.Channels, p)
			}
		}
		t.Channels = append(t.Channels, th.Accel...)
		out = append(out, t)
	}
	return out
}

func (s *Station) throw(id string) int {
	return slices.IndexFunc(s.sk.Throws, func(t skid.Throw) bool { return t.ID == id })
}

// Look gives the newest picture of a throw and has more made for some seconds. Any goroutine.
func (s *Station) Look(throw string) *panel.Look {
	i := s.throw(throw)
	if i < 0 {
		return nil
	}
	t := &s.gallery.looks[i]
	if !s.gallery.wanted(&t.asked) {
		t.shown.Store(nil) // of when somebody last looked, perhaps long ago
	}
	s.gallery.ask(&t.asked)
	return t.shown.Load()
}

// Signal gives the newest second of a channel and has more gathered for some seconds. Any goroutine.
func (s *Station) Signal(channel string) *panel.Signal {
	ch, ok := s.sk.ChannelByID(channel)
	if !ok || ch.Input >= s.info.Channels {
		return nil
	}
	s.gallery.ask(&s.gallery.raw)
	h := s.gallery.heard.Load()
	if h == nil || len(h.blocks) == 0 {
		return nil
	}
	gain, offset := ch.Scale(s.info.Bits)
	sig := &panel.Signal{Channel: ch.ID, Kind: string(ch.Kind), Unit: "V", Density: "V²/Hz", Rate: s.info.Rate, Seq0: h.blocks[0].Seq0, At: h.at}
	per := 1.0
	switch ch.Kind {
	case skid.Pressure:
		sig.Unit, sig.Density, per = "bar abs", "bar²/Hz", 1e-5
	case skid.Acceleration:
		sig.Unit, sig.Density, per = "g", "g²/Hz", 1/9.80665
		sig.Bands = [][2]float64{s.sk.Detection.ImpactBand, s.sk.Detection.LeakBand}
	}
	gain, offset = gain*per, offset*per
	for i := range h.blocks {
		for _, v := range h.blocks[i].Counts[ch.Input][:h.blocks[i].N] {
			sig.V = append(sig.V, float64(v)*gain+offset)
		}
	}
	full := float64(int64(1) << (s.info.Bits - 1))
	sig.Full = [2]float64{offset - full*gain, offset + (full-1)*gain}
	if gain < 0 {
		sig.Full[0], sig.Full[1] = sig.Full[1], sig.Full[0]
	}
	return sig
}

// settleTurns is how many turns of a clip pass before its picture is taken: filters and windows have settled then.
const settleTurns = 20

// Reference takes a turn out of the newest reference clip. The first question after a new clip runs the line over some
// seconds of it, in the asker's goroutine; one at a time.
func (s *Station) Reference(ctx context.Context, throw string) (*panel.Look, error) {
	if s.throw(throw) < 0 {
		return nil, fmt.Errorf("station: throw %q: %w", throw, panel.ErrNoReference)
	}
	clip := ""
	for _, c := range s.Now().Clips {
		if c.Complete && strings.HasPrefix(c.ID, referenceID) && c.ID > clip { // they end in the day
			clip = c.ID
		}
	}
	if clip == "" {
		return nil, fmt.Errorf("station: %w", panel.ErrNoReference)
	}
	g := s.gallery
	g.reference.Lock()
	defer g.reference.Unlock()
	if g.clip != clip {
		kept, err := s.lookInto(ctx, clip)
		if err != nil {
			return nil, err
		}
		g.clip, g.kept = clip, kept
	}
	l := g.kept[throw]
	if l == nil {
		return nil, fmt.Errorf("station: %s in clip %s: %w", throw, clip, panel.ErrNoReference)
	}
	return l, nil
}

// lookInto runs the line over a clip until every throw has had its picture taken.
func (s *Station) lookInto(ctx context.Context, clip string) (map[string]*panel.Look, error) {
	dir, err := os.MkdirTemp("", "lapwing-look-")
	if err != nil {
		return nil, fmt.Errorf("station: reference: %w", err)
	}
	defer os.RemoveAll(dir)
	if err := s.Export(ctx, clip, dir); err != nil {
		return nil, err
	}
	stem := filepath.Join(dir, clip)
	r := ReviewOptions{SkidFile: stem + ".skid.yaml", Recording: stem + ".wav"}
	if _, err := os.Stat(r.SkidFile); err != nil {
		r.SkidFile = s.o.SkidFile
	}
	if _, err := os.Stat(stem + ".process.csv"); err == nil {
		r.ProcessCSV = stem + ".process.csv"
	}
	inner, enough := context.WithCancel(ctx)
	defer enough()
	kept := map[string]*panel.Look{}
	var devs []duty.Deviation
	good := 0
	r.each = func(l *Line, o *Output) {
		if o.Turn == nil || !o.Turn.Valid() || len(kept) > 0 {
			return
		}
		if good++; good <= settleTurns {
			return
		}
		for i := range l.sk.Throws {
			if p := l.lookAt(o, i, &devs); p != nil {
				p.Picture.About = "clip " + clip + ": " + p.Picture.About
				kept[p.Throw] = p
			}
		}
		if len(kept) > 0 {
			enough()
		}
	}
	if err := Review(inner, r); err != nil && len(kept) == 0 {
		return nil, err
	}
	if ctx.Err() != nil {
		return nil, ctx.Err()
	}
	if len(kept) == 0 {
		return nil, errors.Join(panel.ErrNoReference, fmt.Errorf("station: clip %s has no turn that can be measured", clip))
	}
	return kept, nil
}
