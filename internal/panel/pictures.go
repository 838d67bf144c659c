package panel

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"sync"
	"time"
	"unicode/utf8"

	"lapwing/internal/chart"
	"lapwing/internal/dsp"
)

// Bounds of what is held for people who look. Ten pages on one throw ask for the same turn and get the same drawing.
const (
	looksHeld    = 24              // turns per throw: a frozen one stays as long as it is asked for
	drawingsHeld = 64              // drawings, of some 100 KiB
	newestFor    = time.Second     // how long a turn goes on being handed out as the newest
	lookWait     = 2 * time.Second // for a first picture, or second of signal, after nobody has looked
)

var (
	errNoPicture = errors.New("there is no picture yet: pictures are made of turns that can be measured, while somebody looks")
	errTurnGone  = errors.New("that turn is no longer held; look at the newest one")
)

// pictures holds turns that were looked at of late and what was drawn of them.
type pictures struct {
	src Looker
	now func() time.Time

	mu       sync.Mutex
	looks    map[string][]*Look // by throw, last used first
	renewed  map[string]time.Time
	newest   map[string]*Look
	drawings []*drawn // last used first

	one chan struct{} // one drawing at a time, so that pages never take more than one core
}

// drawingOf says what is drawn how.
type drawingOf struct {
	throw     string // or a channel
	turn      int64  // or a sample number
	reference string // clip, a turn, or none
	kind      string
	size      string
	theme     chart.Theme
	format    chart.Format
}

type drawn struct {
	of    drawingOf
	bytes []byte
	areas []chart.Area
}

func newPictures(src Looker) *pictures {
	return &pictures{src: src, now: time.Now, looks: map[string][]*Look{}, renewed: map[string]time.Time{}, newest: map[string]*Look{}, one: make(chan struct{}, 1)}
}

// look gives a turn of a throw; 0: the newest, for which it waits a little.
func (p *pictures) look(ctx context.Context, throw string, turn int64) (*Look, error) {
	if turn != 0 {
		p.src.Look(throw) // keeps pictures coming for whoever goes on from here
		p.mu.Lock()
		defer p.mu.Unlock()
		held := p.looks[throw]
		i := slices.IndexFunc(held, func(l *Look) bool { return l.Turn == turn })
		if i < 0 {
			return nil, errTurnGone
		}
		l := held[i]
		copy(held[1:i+1], held[:i])
		held[0] = l
		return l, nil
	}
	for end := p.now().Add(lookWait); ; {
		if l := p.newestOf(throw); l != nil {
			return l, nil
		}
		if !p.now().Before(end) {
			return nil, errNoPicture
		}
		select {
		case <-ctx.Done():
			return nil, ctx.Err()
		case <-time.After(50 * time.Millisecond):
		}
	}
}

// newestOf asks the source at most once a second, so that all pages show the same turn.
func (p *pictures) newestOf(throw string) *Look {
	p.mu.Lock()
	defer p.mu.Unlock()
	now := p.now()
	if l := p.newest[throw]; l != nil && now.Sub(p.renewed[throw]) < newestFor {
		return l
	}
	l := p.src.Look(throw)
	if l == nil {
		return nil
	}
	p.newest[throw], p.renewed[throw] = l, now
	held := p.looks[throw]
	if slices.Contains(held, l) {
		return l
	}
	held = slices.DeleteFunc(held, func(o *Look) bool { return o.Turn == l.Turn }) // of a run before this one
	held = slices.Insert(held, 0, l)
	p.looks[throw] = held[:min(len(held), looksHeld)]
	return l
}

// draw gives a drawing, made or remembered.
func (p *pictures) draw(ctx context.Context, of drawingOf, make func() (*chart.Drawing, error)) (*drawn, error) {
	if d := p.remembered(of); d != nil {
		return d, nil
	}
	select {
	case p.one <- struct{}{}:
		defer func() { <-p.one }()
	case <-ctx.Done():
		return nil, ctx.Err()
	}
	if d := p.remembered(of); d != nil {
		return d, nil
	}
	c, err := make()
	if err != nil {
		return nil, err
	}
	var b bytes.Buffer
	if err := c.Write(&b, of.format); err != nil {
		return nil, err
	}
	d := &drawn{of: of, bytes: b.Bytes(), areas: c.Areas}
	p.mu.Lock()
	defer p.mu.Unlock()
	p.drawings = slices.Insert(p.drawings, 0, d)
	p.drawings = p.drawings[:min(len(p.drawings), drawingsHeld)]
	return d, nil
}

func (p *pictures) remembered(of drawingOf) *drawn {
	p.mu.Lock()
	defer p.mu.Unlock()
	i := slices.IndexFunc(p.drawings, func(d *drawn) bool { return d.of == of })
	if i < 0 {
		return nil
	}
	d := p.drawings[i]
	copy(p.drawings[1:i+1], p.drawings[:i])
	p.drawings[0] = d
	return d
}

// kinds of charts of a throw, in the order of the page.
var kinds = []string{"angle", "pv", "logpv", "load"}

var drawers = map[string]func(chart.Picture, chart.Options) (*chart.Drawing, error){"angle": chart.Angle, "pv": chart.PV, "logpv": chart.LogPV, "load": chart.RodLoad}

// sizes in mm, by name and kind: for a page two charts wide, and for a phone. Any other size is the chart's own, for print.
func options(of drawingOf, vibs int) chart.Options {
	o := chart.Options{Theme: of.theme}
	switch of.size {
	case "screen":
		o.WidthMM, o.HeightMM = 240, 100+24*float64(vibs)
		switch of.kind {
		case "pv", "logpv":
			o.WidthMM, o.HeightMM = 145, 112
		case "load":
			o.HeightMM = 100
		case "signal", "spectrum":
			o.HeightMM = 70
		}
	case "narrow":
		o.WidthMM, o.HeightMM = 105, 100
		switch of.kind {
		case "angle": // it is pushed sideways: its words do not fit a phone
			o.WidthMM, o.HeightMM = 165, 100+24*float64(vibs)
		case "load":
			o.HeightMM = 120
		}
	}
	return o
}

// throwChart draws one throw.
func (p *pictures) throwChart(ctx context.Context, of drawingOf, now, reference *Look) (*drawn, error) {
	return p.draw(ctx, of, func() (*chart.Drawing, error) {
		pic := chart.Picture{Turns: []chart.Cylinder{now.Picture}}
		if reference != nil {
			r := reference.Picture
			pic.Reference = &r
			pic.Turns[0].About += "\nreference: " + r.About
		}
		o := options(of, len(now.Picture.Vib))
		pic.Turns[0].About = folded(pic.Turns[0].About, o.WidthMM)
		return drawers[of.kind](pic, o)
	})
}

// channelChart draws the newest second of a channel, or its spectrum.
func (p *pictures) channelChart(ctx context.Context, of drawingOf, s *Signal) (*drawn, error) {
	return p.draw(ctx, of, func() (*chart.Drawing, error) {
		long := fmt.Sprintf("%.2f s to %s UTC, %g samples/s", float64(len(s.V))/s.Rate, s.At.UTC().Format("2006-01-02 15:04:05.0"), s.Rate)
		if of.kind == "signal" {
			return chart.Signal{Title: s.Channel + ": signal as sampled", About: long, Unit: s.Unit, Rate: s.Rate, V: s.V, Full: s.Full}.Draw(options(of, 0))
		}
		n, most := 4096, s.Rate/2
		if s.Kind == "pressure" { // a gauge passage rings at some hundred hertz, and little lies above
			n, most = 16384, min(most, 3000)
		}
		for n > len(s.V) && n > 8 {
			n /= 2
		}
		w, err := dsp.NewWelch(s.Rate, n)
		if err != nil {
			return nil, err
		}
		psd := make([]float64, w.Bins())
		w.PSD(psd, level(s.V))
		long = folded(long, options(of, 0).WidthMM)
		sp := chart.Spectrum{Title: s.Channel + ": spectrum", About: long + fmt.Sprintf("\nmean taken off, Hann window, %.1f Hz a bin", s.Rate/float64(n)), Unit: s.Density, Bands: s.Bands, Density: psd}
		for i := 0; i < len(psd) && float64(i)*s.Rate/float64(n) <= most; i++ {
			sp.Hz = append(sp.Hz, float64(i)*s.Rate/float64(n))
		}
		sp.Density = psd[:len(sp.Hz)]
		return sp.Draw(options(of, 0))
	})
}

// folded breaks lines at commas, so that they fit a drawing of a width; 0: the chart's own, which is wide.
func folded(s string, widthMM float64) string {
	const perMM = .64 // characters of the small type
	most := int(widthMM * perMM)
	if most == 0 {
		return s
	}
	var out []string
	for _, line := range strings.Split(s, "\n") {
		row := ""
		for _, piece := range strings.SplitAfter(line, ", ") {
			if row != "" && utf8.RuneCountInString(row+piece) > most {
				out, row = append(out, strings.TrimSpace(row)), ""
			}
			row += piece
		}
		out = append(out, row)
	}
	return strings.Join(out, "\n")
}

// level takes the mean off: a pressure's would hide all else behind the window's skirts.
func level(v []float64) []float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	out := make([]float64, len(v))
	for i, x := range v {
		out[i] = x - sum/float64(len(v))
	}
	return out
}

// spread gives the least, largest, mean and root mean square about the mean of a signal.
func spread(v []float64) (lo, hi, mean, rms float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, x := range v {
		lo, hi, mean = min(lo, x), max(hi, x), mean+x
	}
	mean /= float64(len(v))
	for _, x := range v {
		rms += (x - mean) * (x - mean)
	}
	return lo, hi, mean, math.Sqrt(rms / float64(len(v)))
}
