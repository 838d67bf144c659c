package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/alarm"
	"lapwing/internal/chart"
	"lapwing/internal/dsp"
	"lapwing/internal/duty"
	"lapwing/internal/skid"
)

// ChartOptions say what to draw of a recording.
type ChartOptions struct {
	Review    ReviewOptions // skid file, recording, process values, baseline or learning run; no outputs
	Kind      string        // angle, pv, logpv, load, trend, spectrum
	Subject   string        // angle, pv, logpv, load: a throw, "" the first; trend: a measure <subject>/<name>; spectrum: a channel
	Turn      int64         // turn looked at; negative: the last good one
	Turns     [2]int64      // further turns laid over it, END not included; 0, 0: none
	Reference int64         // turn drawn as a reference; negative: none, or the last good one of Against
	Against   string        // recording that the reference is taken from; "": the same
	Draw      chart.Options
	Out       string // file; its name's ending gives the format
}

// ChartKinds are the kinds of chart.
var ChartKinds = []string{"angle", "pv", "logpv", "load", "trend", "spectrum"}

const mostOverlaid = 200

// Chart runs the line over a recording and draws one chart.
func Chart(ctx context.Context, o ChartOptions) error {
	format := chart.Format(strings.TrimPrefix(strings.ToLower(filepath.Ext(o.Out)), "."))
	if format != chart.SVG && format != chart.PNG && format != chart.PDF {
		return fmt.Errorf("chart: %q: end the file's name in .svg, .png or .pdf", o.Out)
	}
	for _, in := range []string{o.Review.SkidFile, o.Review.Recording, o.Against} {
		if in != "" && filepath.Clean(in) == filepath.Clean(o.Out) {
			return fmt.Errorf("chart: %s is read for this chart: name another file to write", o.Out)
		}
	}
	sk, err := skid.Load(o.Review.SkidFile)
	if err != nil {
		return err
	}
	var d *chart.Drawing
	switch o.Kind {
	case "angle", "pv", "logpv", "load":
		d, err = o.turns(ctx, sk)
	case "trend":
		d, err = o.trend(ctx, sk)
	case "spectrum":
		d, err = o.spectrum(ctx, sk)
	default:
		return fmt.Errorf("chart: no kind %q: %s", o.Kind, strings.Join(ChartKinds, ", "))
	}
	if err != nil {
		return err
	}
	return writeChart(o.Out, d, format)
}

func writeChart(path string, d *chart.Drawing, f chart.Format) error {
	w, err := os.Create(path)
	if err != nil {
		return fmt.Errorf("chart: %w", err)
	}
	return errors.Join(d.Write(w, f), w.Close())
}

// turns draws one throw.
func (o *ChartOptions) turns(ctx context.Context, sk *skid.Skid) (*chart.Drawing, error) {
	throw := 0
	if o.Subject != "" {
		var names []string
		throw = -1
		for i := range sk.Throws {
			if names = append(names, sk.Throws[i].ID); sk.Throws[i].ID == o.Subject {
				throw = i
			}
		}
		if throw < 0 {
			return nil, fmt.Errorf("chart: no throw %q in the skid file: %s", o.Subject, strings.Join(names, ", "))
		}
	}
	if n := o.Turns[1] - o.Turns[0]; n > mostOverlaid {
		return nil, fmt.Errorf("chart: %d turns over each other show nothing: at most %d", n, mostOverlaid)
	}
	want := map[int64]bool{}
	for n := o.Turns[0]; n < o.Turns[1]; n++ {
		want[n] = true
	}
	if o.Turn >= 0 {
		want[o.Turn] = true
	}
	if o.Reference >= 0 && o.Against == "" {
		want[o.Reference] = true
	}
	pick := newest
	if o.Turn >= 0 {
		pick = nil
	}
	got, last, err := gatherPictures(ctx, o.Review, throw, want, pick)
	if err != nil {
		return nil, err
	}
	turn := o.Turn
	if turn < 0 {
		turn = last
	}
	now, ok := got[turn]
	if !ok {
		return nil, noTurn(o.Review.Recording, turn, last)
	}
	p := chart.Picture{Turns: []chart.Cylinder{now.Cylinder}}
	for n := o.Turns[0]; n < o.Turns[1]; n++ {
		if c, ok := got[n]; ok && n != turn {
			p.Turns = append(p.Turns, c.Cylinder)
		}
	}
	var reference *pictured
	switch {
	case o.Against != "":
		r := o.Review
		r.Recording, r.ProcessCSV = o.Against, besideOf(o.Against, r.ProcessCSV)
		pick := now.unlike
		if o.Reference >= 0 {
			pick = nil
		}
		got, last, err := gatherPictures(ctx, r, throw, map[int64]bool{o.Reference: true}, pick)
		if err != nil {
			return nil, err
		}
		n := o.Reference
		if n < 0 {
			n = last
		}
		c, ok := got[n]
		if !ok {
			return nil, noTurn(o.Against, n, last)
		}
		reference = c
	case o.Reference >= 0:
		c, ok := got[o.Reference]
		if !ok {
			return nil, noTurn(o.Review.Recording, o.Reference, last)
		}
		reference = c
	}
	if reference != nil {
		p.Reference = &reference.Cylinder
		p.Turns[0].About += "\nreference: " + reference.About
		if now.unlike(reference) > alike {
			p.Turns[0].About += "\nthe reference is of ANOTHER DUTY: the curves differ by that alone"
		}
	}
	return map[string]func(chart.Picture, chart.Options) (*chart.Drawing, error){
		"angle": chart.Angle, "pv": chart.PV, "logpv": chart.LogPV, "load": chart.RodLoad}[o.Kind](p, o.Draw)
}

// besideOf is the process file that a pulled clip has beside it; without one the process values of the skid file hold.
func besideOf(recording, given string) string {
	if given == "" {
		return ""
	}
	beside := strings.TrimSuffix(recording, filepath.Ext(recording)) + ".process.csv"
	if _, err := os.Stat(beside); err == nil {
		return beside
	}
	return ""
}

func noTurn(file string, n, last int64) error {
	if last < 0 {
		return fmt.Errorf("chart: %s has no turn that can be measured", file)
	}
	return fmt.Errorf("chart: %s has no turn %d that can be measured; the last one is %d", file, n, last)
}

// pictured is what charts show of a turn, and its duty.
type pictured struct {
	chart.Cylinder
	step        int
	steady      bool
	rpm, ps, pd float64
}

// alike is how far apart two duties may be for their curves to be held against each other, see unlike.
const alike = .1

// unlike is how far apart the duties of two turns are: the relative differences of speed and line pressures added up,
// another load step counting more than any, a turn of unsteady running a little.
func (p *pictured) unlike(q *pictured) float64 {
	d := 0.0
	for _, r := range [][2]float64{{p.rpm, q.rpm}, {p.ps, q.ps}, {p.pd, q.pd}} {
		if x := math.Abs(math.Log(r[0] / r[1])); !math.IsNaN(x) {
			d += x
		}
	}
	if p.step != q.step {
		d += 10
	}
	if !q.steady {
		d += alike / 2
	}
	return d
}

// newest prefers any later turn.
func newest(*pictured) float64 { return 0 }

// gatherPictures plays a recording and keeps the turns wanted, and of all good ones the last among those with the least
// distance; best is its number. Without a distance best is the last good turn, which need not be kept.
func gatherPictures(ctx context.Context, r ReviewOptions, throw int, want map[int64]bool, distance func(*pictured) float64) (got map[int64]*pictured, best int64, err error) {
	got, best = map[int64]*pictured{}, -1
	least := math.Inf(1)
	r.each = func(l *Line, o *Output) {
		if o.Turn == nil || !o.Turn.Valid() {
			return
		}
		n := o.Turn.Number
		if !want[n] && distance == nil {
			best = n
			return
		}
		c, perr := l.Picture(o, throw)
		if perr != nil {
			return
		}
		p := &pictured{Cylinder: c, step: o.Points[throw].Step, steady: o.Points[throw].State == duty.Steady, rpm: o.Points[throw].RPM, ps: o.Points[throw].Ps, pd: o.Points[throw].Pd}
		if want[n] {
			got[n] = p
		}
		if distance == nil {
			best = n
		} else if d := distance(p); d <= least {
			if !want[best] {
				delete(got, best)
			}
			got[n], best, least = p, n, d
		}
	}
	err = Review(ctx, r)
	if err != nil && len(got) > 0 && ctx.Err() == nil {
		err = nil // a damaged recording is drawn as far as it can be read
	}
	return got, best, err
}

// trend draws a measure over the recording, against its baseline when there is one.
func (o *ChartOptions) trend(ctx context.Context, sk *skid.Skid) (*chart.Drawing, error) {
	at := strings.LastIndex(o.Subject, "/")
	if at < 0 {
		return nil, fmt.Errorf("chart: trend %q: write <subject>/<measure>, e.g. %s.he/n_comp_late", o.Subject, sk.Throws[0].ID)
	}
	subject, name := o.Subject[:at], o.Subject[at+1:]
	tr := chart.Trend{Title: o.Subject, Unit: axisWords(name)}
	feature, unknown := -1, false
	var devs []duty.Deviation
	r := o.Review
	r.each = func(l *Line, out *Output) {
		if feature < 0 && !unknown {
			feature = l.layout.Find(subject, name)
			if unknown = feature < 0; !unknown {
				tr.About = l.sk.ID + ": " + l.layout[feature].What
			}
		}
		if unknown {
			return
		}
		for i := range out.Transitions {
			if t := &out.Transitions[i]; t.To == alarm.Unacked {
				tr.Marks = append(tr.Marks, chart.TrendMark{At: t.At, Text: fmt.Sprintf("%s: %s %s", t.Severity, t.Subject, t.Kind), Severity: int(t.Severity)})
			}
		}
		if out.Turn == nil || !out.Turn.Valid() {
			return
		}
		f := &l.layout[feature]
		nan := math.NaN()
		p := chart.TrendPoint{At: out.At, Value: l.vec.V[feature]*f.Scale + f.Shift, Expected: nan, Spread: nan}
		if l.ref != nil {
			devs = l.ref.Deviate(devs[:0], f.Throw, l.points[f.Throw], &l.vec)
			for k := range devs {
				if d := &devs[k]; d.Feature == feature && d.Seen {
					p.Expected, p.Spread = d.Expected*f.Scale+f.Shift, d.Spread*math.Abs(f.Scale)
				}
			}
		}
		tr.Points = append(tr.Points, p)
	}
	if err := Review(ctx, r); err != nil && (len(tr.Points) == 0 || ctx.Err() != nil) {
		return nil, err
	}
	if unknown {
		return nil, fmt.Errorf("chart: this machine has no measure %s: DEVELOPERS.md lists them, and the values of a turn record show the names", o.Subject)
	}
	return tr.Over(o.Draw)
}

// axisWords makes words of a measure's name, whose end is its unit: leak_area_mm2 reads leak area, mm².
func axisWords(name string) string {
	for _, u := range [][2]string{{"bar_abs", "bar abs"}, {"kg_h", "kg/h"}, {"bar_s", "bar/s"}, {"mm2", "mm²"}, {"cm3", "cm³"}, {"percent", "%"}, {"deg", "°"}, {"kn", "kN"}, {"kw", "kW"}, {"db", "dB"},
		{"bar", "bar"}, {"ms", "ms"}, {"ln", "ln"}, {"g", "g"}, {"c", "°C"}, {"k", "K"}} {
		if stem, ok := strings.CutSuffix(name, "_"+u[0]); ok {
			return strings.ReplaceAll(stem, "_", " ") + ", " + u[1]
		}
	}
	return strings.ReplaceAll(name, "_", " ")
}

// Spectra are averaged over segments of about so many samples, over at most so many seconds.
const (
	spectrumSegment = 8192
	spectrumSeconds = 60
)

// spectrum draws the density of a channel's raw signal.
func (o *ChartOptions) spectrum(ctx context.Context, sk *skid.Skid) (*chart.Drawing, error) {
	ch, ok := sk.ChannelByID(o.Subject)
	if !ok {
		var ids []string
		for i := range sk.Channels {
			ids = append(ids, sk.Channels[i].ID)
		}
		return nil, fmt.Errorf("chart: no channel %q in the skid file: %s", o.Subject, strings.Join(ids, ", "))
	}
	src, err := wav.Open(o.Review.Recording, wav.Options{})
	if err != nil {
		return nil, err
	}
	defer src.Close()
	info := src.Info()
	if ch.Input >= info.Channels {
		return nil, fmt.Errorf("chart: %s has %d channels, %s is input %d (inputs count from 0)", o.Review.Recording, info.Channels, ch.ID, ch.Input)
	}
	gain, offset := ch.Scale(info.Bits)
	var x []float64
	var b acq.Block
	for len(x) < int(spectrumSeconds*info.Rate) {
		if err := src.Read(ctx, &b); err != nil {
			if errors.Is(err, io.EOF) || len(x) > 0 && ctx.Err() == nil {
				break
			}
			return nil, err
		}
		for _, v := range b.Counts[ch.Input][:b.N] {
			x = append(x, float64(v)*gain+offset)
		}
	}
	n := spectrumSegment
	if n > len(x) {
		return nil, fmt.Errorf("chart: %s has %d samples, a spectrum takes %d", o.Review.Recording, len(x), n)
	}
	w, err := dsp.NewWelch(info.Rate, n)
	if err != nil {
		return nil, err
	}
	psd := make([]float64, w.Bins())
	w.PSD(psd, x)
	s := chart.Spectrum{Title: ch.ID + ": spectrum", About: fmt.Sprintf("%s, %s, %.1f s, Hann window, %.1f Hz a bin", sk.ID, filepath.Base(o.Review.Recording), float64(len(x))/info.Rate, info.Rate/float64(n))}
	per := 1.0
	switch ch.Kind {
	case skid.Pressure:
		s.Unit, per = "bar²/Hz", 1e-10
	case skid.Acceleration:
		s.Unit, per = "g²/Hz", 1/(9.80665*9.80665)
		s.Bands = [][2]float64{sk.Detection.ImpactBand}
	default:
		s.Unit = "V²/Hz"
	}
	for i := range psd {
		s.Hz, s.Density = append(s.Hz, float64(i)*info.Rate/float64(n)), append(s.Density, psd[i]*per)
	}
	return s.Draw(o.Draw)
}
