package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/duty"
	"lapwing/internal/skid"
	"lapwing/internal/table"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

// TablesOptions say what to write of a recording as tables.
type TablesOptions struct {
	Review ReviewOptions // skid file, recording, process values, baseline or learning run; its summary is printed
	Dir    string
	Format table.Format
	What   []string // of TableNames
}

// TableNames are the tables that can be written.
var TableNames = []string{"measures", "events", "alarms", "angles", "samples"}

// Tables runs the line over a recording and writes tables, one folder each, partitioned by site, skid and day. It gives
// the files written.
func Tables(ctx context.Context, o TablesOptions) (files []string, err error) {
	sk, err := skid.Load(o.Review.SkidFile)
	if err != nil {
		return nil, err
	}
	for _, w := range o.What {
		if !slices.Contains(TableNames, w) {
			return nil, fmt.Errorf("tables: no table %q: %s", w, strings.Join(TableNames, ", "))
		}
	}
	if len(o.What) == 0 {
		return nil, fmt.Errorf("tables: say which: %s", strings.Join(TableNames, ", "))
	}
	w := &tableWriter{o: &o, sk: sk, tables: map[string]*table.Table{}, place: table.Place{Dir: o.Dir, Site: sk.Site, Skid: sk.ID, Format: o.Format,
		File:  strings.TrimSuffix(filepath.Base(o.Review.Recording), filepath.Ext(o.Review.Recording)),
		About: map[string]string{"skid file SHA-256": sk.Hash, "recording": filepath.Base(o.Review.Recording)}}}
	defer func() {
		for _, name := range TableNames {
			if t := w.tables[name]; t != nil {
				err = errors.Join(err, t.Close())
				files = append(files, t.Files()...)
			}
		}
	}()
	if slices.Contains(o.What, "samples") {
		if err := w.samples(ctx); err != nil {
			return nil, err
		}
	}
	if len(o.What) == 1 && o.What[0] == "samples" {
		return nil, nil
	}
	r := o.Review
	r.each = func(l *Line, out *Output) {
		if w.err == nil {
			w.err = w.turn(l, out)
		}
	}
	return nil, errors.Join(Review(ctx, r), w.err)
}

type tableWriter struct {
	o      *TablesOptions
	sk     *skid.Skid
	place  table.Place
	tables map[string]*table.Table
	devs   []duty.Deviation
	of     []int // by feature: its deviation among devs and 1, 0 none
	err    error
}

// table gives a table by name, and nil when it is not wanted.
func (w *tableWriter) table(name string, cols func() []table.Column) (*table.Table, error) {
	if !slices.Contains(w.o.What, name) {
		return nil, nil
	}
	if t := w.tables[name]; t != nil {
		return t, nil
	}
	p := w.place
	p.Name = name
	t, err := table.New(p, cols())
	w.tables[name] = t
	return t, err
}

func col(name string, t table.Type, note string) table.Column {
	return table.Column{Name: name, Type: t, Note: note}
}

func (w *tableWriter) turn(l *Line, o *Output) error {
	alarms, err := w.table("alarms", func() []table.Column {
		return []table.Column{col("time_utc", table.Instant, "sample clock"), col("id", table.Whole, ""), col("key", table.Text, ""), col("subject", table.Text, ""), col("kind", table.Text, ""),
			col("from_state", table.Text, "IEC 62682"), col("to_state", table.Text, "IEC 62682"), col("severity", table.Text, ""), col("turn", table.Whole, ""), col("first_sample", table.Whole, ""), col("end_sample", table.Whole, "not included"), col("sentence", table.Text, "")}
	})
	if err != nil {
		return err
	}
	for i := range o.Transitions {
		if t := &o.Transitions[i]; alarms != nil {
			if err := alarms.Row(t.At, t.At, int64(t.ID), t.Key, t.Subject, t.Kind, t.From.String(), t.To.String(), t.Severity.String(), t.Turn, t.Seq0, t.Seq1, t.Sentence); err != nil {
				return err
			}
		}
	}
	if o.Turn == nil || !o.Turn.Valid() {
		return nil
	}
	return errors.Join(w.measures(l, o), w.events(o), w.angles(l, o))
}

func (w *tableWriter) measures(l *Line, o *Output) error {
	t, err := w.table("measures", func() []table.Column {
		return []table.Column{col("time_utc", table.Instant, "head-end dead centre of the first throw"), col("turn", table.Whole, ""), col("throw", table.Text, ""), col("duty", table.Text, ""), col("load_step", table.Whole, ""),
			col("speed_rpm", table.Number, ""), col("subject", table.Text, "throw, end, valve group, valve, leak path or event"), col("name", table.Text, "with its unit"), col("value", table.Number, ""),
			col("expected", table.Number, "at this duty by the baseline; absent where it has not seen the duty"), col("spread", table.Number, "robust standard deviation of a turn when healthy")}
	})
	if err != nil || t == nil {
		return err
	}
	if len(w.of) != len(l.layout) {
		w.of = make([]int, len(l.layout))
	}
	clear(w.of)
	w.devs = w.devs[:0]
	if l.ref != nil {
		for i := range l.points {
			w.devs = l.ref.Deviate(w.devs, i, l.points[i], o.Vector)
		}
		for i := range w.devs {
			if w.devs[i].Seen {
				w.of[w.devs[i].Feature] = i + 1
			}
		}
	}
	for i := range l.layout {
		f := &l.layout[i]
		v := o.Vector.V[i]*f.Scale + f.Shift
		if math.IsNaN(v) {
			continue // its reason is in the turn records
		}
		expected, spread := math.NaN(), math.NaN()
		if k := w.of[i]; k > 0 {
			d := &w.devs[k-1]
			expected, spread = d.Expected*f.Scale+f.Shift, d.Spread*math.Abs(f.Scale)
		}
		p := &o.Points[f.Throw]
		if err := t.Row(o.At, o.At, o.Turn.Number, w.sk.Throws[f.Throw].ID, p.State.String(), int64(p.Step), o.Turn.Throws[f.Throw].RPM, f.Subject, f.Name, v, expected, spread); err != nil {
			return err
		}
	}
	return nil
}

func (w *tableWriter) events(o *Output) error {
	t, err := w.table("events", func() []table.Column {
		return []table.Column{col("time_utc", table.Instant, ""), col("turn", table.Whole, ""), col("throw", table.Text, ""), col("cylinder_end", table.Text, ""), col("event", table.Text, ""), col("state", table.Text, ""),
			col("angle_deg", table.Number, "where the pressure leaves the closed line"), col("crossing_deg", table.Number, "closed line extended to the plateau"), col("expected_deg", table.Number, "of a sealed cylinder between this turn's plateaus"),
			col("window_low_deg", table.Number, ""), col("window_high_deg", table.Number, ""), col("why", table.Text, "")}
	})
	if err != nil || t == nil {
		return err
	}
	for i := range o.Windows.Throws {
		for e := range o.Windows.Throws[i].Ends {
			end := &o.Windows.Throws[i].Ends[e]
			if end.NotPresent {
				continue
			}
			for ev := range window.Events {
				x := &end.W[ev]
				if err := t.Row(o.At, o.At, o.Turn.Number, w.sk.Throws[i].ID, wire.EndNames[e], wire.EventNames[ev], x.State.String(), x.Angle, x.Thermo, x.Expected, x.Lo, x.Hi, x.Why); err != nil {
					return err
				}
			}
		}
	}
	return nil
}

// angles is the angle domain from 0° to 360° of each throw, as analysed.
func (w *tableWriter) angles(l *Line, o *Output) error {
	accel := map[string]int{} // channel to column
	var ids []string
	for i := range w.sk.Throws {
		for _, a := range w.sk.Throws[i].Accel {
			if _, twice := accel[a]; !twice {
				accel[a] = len(ids)
				ids = append(ids, a)
			}
		}
	}
	t, err := w.table("angles", func() []table.Column {
		c := []table.Column{col("time_utc", table.Instant, "of the turn"), col("turn", table.Whole, ""), col("throw", table.Text, ""), col("angle_deg", table.Number, "after the throw's head-end dead centre"),
			col("p_he_bar_abs", table.Number, ""), col("p_ce_bar_abs", table.Number, ""), col("v_he_l", table.Number, ""), col("v_ce_l", table.Number, "")}
		for _, id := range ids {
			c = append(c, col(id+"_peak_g", table.Number, "largest value in the bin, impact band"))
		}
		return c
	})
	if err != nil || t == nil {
		return err
	}
	for i := range o.Turn.Throws {
		th := &o.Turn.Throws[i]
		row := make([]any, 8+len(ids))
		for k := range th.Grid.N {
			a := th.Grid.At(k)
			if a < -1e-9 || a >= 360-1e-9 {
				continue
			}
			row[0], row[1], row[2], row[3] = o.At, o.Turn.Number, w.sk.Throws[i].ID, a
			for e := range 2 {
				p := math.NaN()
				if th.P[e] != nil && th.Bad[e] == "" {
					p = th.P[e][k] * 1e-5
				}
				row[4+e], row[6+e] = p, l.mea[i].Cylinder.Volume(e, a)*1e3
			}
			for c := range ids {
				row[8+c] = nil
			}
			for v := range th.Vib {
				if x := &th.Vib[v]; x.Suspect == "" {
					row[8+accel[x.Channel]] = x.Peak[k] / 9.80665
				}
			}
			if err := t.Row(o.At, slices.Clone(row)...); err != nil {
				return err
			}
		}
	}
	return nil
}

// samples is the recording as it was sampled: integer counts.
func (w *tableWriter) samples(ctx context.Context) error {
	src, err := wav.Open(w.o.Review.Recording, wav.Options{})
	if err != nil {
		return err
	}
	defer src.Close()
	info := src.Info()
	cols := []table.Column{col("sample", table.Whole, "number of the sample in its run"), col("time_utc", table.Instant, "sample clock")}
	for i := range info.Channels {
		c := col(fmt.Sprintf("input_%d", i), table.Whole, "counts")
		for k := range w.sk.Channels {
			if ch := &w.sk.Channels[k]; ch.Input == i {
				gain, offset := ch.Scale(info.Bits)
				c.Name, c.Note = ch.ID, fmt.Sprintf("counts of input %d; SI value = counts · %.17g + %.17g (%s)", i, gain, offset, ch.Kind)
			}
		}
		cols = append(cols, c)
	}
	t, err := w.table("samples", func() []table.Column { return cols })
	if err != nil {
		return err
	}
	start := info.Start
	if start.IsZero() {
		start = time.Unix(0, 0).UTC()
	}
	var b acq.Block
	for {
		if err := src.Read(ctx, &b); errors.Is(err, io.EOF) {
			return nil
		} else if err != nil {
			return err
		}
		for k := range b.N {
			seq := b.Seq0 + int64(k)
			at := start.Add(time.Duration(math.Round(float64(seq) / info.Rate * 1e9)))
			row := make([]any, 2+info.Channels)
			row[0], row[1] = seq, at
			for c := range info.Channels {
				row[2+c] = int64(b.Counts[c][k])
			}
			if err := t.Row(at, row...); err != nil {
				return err
			}
		}
	}
}
