package tape

import (
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"sort"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
)

// cautions go with every export: it may make somebody go to the machine.
var cautions = []string{
	"Lapwing is a monitor, not a protection system; this recording is evidence for an analyst, not a permit to work.",
	"Before touching a valve, a transducer or its piping: stop, isolate, depressurise and lock out, and check for gas.",
	"Follow the site's permits and local codes; work on pressure parts and in hazardous areas is for licensed people.",
}

// Exported tells what Export wrote.
type Exported struct {
	Files   []string // the recording first
	Samples int64    // per channel
	Lost    int64    // missing inside, per channel
	First   int64    // number of the first sample
}

// note is the JSON file beside a recording.
type note struct {
	Clip      *Clip    `json:"clip,omitempty"`
	Run       uint32   `json:"run"`
	From      int64    `json:"from"`
	To        int64    `json:"to"`
	First     int64    `json:"first_sample"`
	Samples   int64    `json:"samples"`
	Lost      int64    `json:"samples_lost"`
	Source    string   `json:"source,omitempty"`
	RateHz    float64  `json:"rate_hz"`
	Channels  int      `json:"channels"`
	Bits      int      `json:"bits"`
	FirstUTC  string   `json:"first_sample_utc,omitempty"`
	Skid      string   `json:"skid_sha256,omitempty"`
	SkidNote  string   `json:"skid_note,omitempty"`
	Damage    string   `json:"damage,omitempty"`
	Cautions  []string `json:"cautions"`
	ProcessNo string   `json:"process_note,omitempty"`
	StateNote string   `json:"state_note,omitempty"`
}

// ExportClip writes a clip as dst.wav, with the skid file in force as dst.skid.yaml, the process values as
// dst.process.csv, the state of the analysis at its beginning as dst.state and a note with reason and cautions as dst.json; files whose contents are not known are left out and
// the note says so. dst may end in .wav. Counts are as sampled. Unreadable segments become gaps; the error is then a
// *DamageError and the files are there all the same.
func (t *Tape) ExportClip(dst, id string) (Exported, error) {
	c, err := t.Clip(id)
	if err != nil {
		return Exported{}, err
	}
	return t.export(dst, t.clips, Span{c.Run, c.From, c.To}, &c)
}

// ExportSpan is ExportClip for a span of the ring.
func (t *Tape) ExportSpan(dst string, s Span) (Exported, error) { return t.export(dst, t.ring, s, nil) }

func (t *Tape) export(dst string, from *store, span Span, clip *Clip) (Exported, error) {
	dst = strings.TrimSuffix(dst, ".wav")
	e := exporter{path: dst, span: span, clip: clip}
	err := from.read(span, e.segment, e.block)
	var damage *DamageError
	if errors.As(err, &damage) {
		err = nil
	}
	if err == nil && e.wav == nil {
		err = errors.New("nothing of it is stored")
	}
	if err == nil {
		err = e.wav.Close()
	}
	if err != nil {
		if e.wav != nil {
			err = errors.Join(err, e.wav.Abort())
		}
		return Exported{}, fmt.Errorf("tape: export %s: %w", filepath.Base(dst), err)
	}
	e.out.Files = append(e.out.Files, dst+".wav")
	if err := e.beside(t, damage); err != nil {
		return e.out, fmt.Errorf("tape: export %s: %w", filepath.Base(dst), err)
	}
	if damage != nil {
		return e.out, damage
	}
	return e.out, nil
}

type exporter struct {
	path string
	span Span
	clip *Clip
	meta *segMeta // of the first segment

	changed int64 // sample from which another skid file was in force; 0: none

	rows []ProcessRow
	wav  *wav.Writer
	out  Exported
}

func (e *exporter) segment(m *segMeta) {
	if e.meta == nil {
		e.meta = m
	}
	if m.Skid != e.meta.Skid && e.changed == 0 {
		e.changed = m.Seq0
	}
	e.rows = append(e.rows, m.Process...)
}

func (e *exporter) block(b *acq.Block) error {
	if e.wav == nil {
		m := e.meta
		o := wav.WriterOptions{Rate: m.Rate, Channels: m.Channels, Bits: 16, Skid: m.Skid}
		for o.Bits < m.Bits {
			o.Bits += 8
		}
		if o.Bits != m.Bits {
			o.CodeBits = m.Bits
		}
		if m.Start != 0 {
			o.Start = time.Unix(0, m.Start).UTC()
		}
		if e.clip != nil {
			o.Label, o.Note = e.clip.ID, e.clip.Reason
		}
		w, err := wav.Create(e.path+".wav", o)
		if err != nil {
			return err
		}
		e.wav, e.out.First = w, b.Seq0
	} else {
		e.out.Lost += b.Lost
	}
	e.out.Samples += int64(b.N)
	return e.wav.Write(b)
}

// beside writes the files that go with the recording.
func (e *exporter) beside(t *Tape, damage *DamageError) error {
	m := e.meta
	n := note{
		Clip: e.clip, Run: e.span.Run, From: e.span.From, To: e.span.To, First: e.out.First,
		Samples: e.out.Samples, Lost: e.out.Lost, Source: m.Source, RateHz: m.Rate, Channels: m.Channels, Bits: m.Bits,
		Skid: m.Skid, Cautions: cautions,
	}
	if m.Start != 0 {
		at := time.Unix(0, m.Start).Add(time.Duration(float64(e.out.First) / m.Rate * 1e9))
		n.FirstUTC = at.UTC().Format(time.RFC3339Nano)
	}
	if damage != nil {
		n.Damage = damage.Error()
	}
	skid, err := t.SkidFile(m.Skid)
	switch {
	case m.Skid == "":
		n.SkidNote = "the tape was run without a skid file"
	case err != nil:
		n.SkidNote = "the skid file in force cannot be read back: " + err.Error()
	case skid == nil:
		n.SkidNote = "the skid file in force is no longer on the tape"
	default:
		if err := e.write(".skid.yaml", skid); err != nil {
			return err
		}
	}
	if e.changed != 0 {
		n.SkidNote = strings.TrimPrefix(n.SkidNote+fmt.Sprintf("; another skid file was in force from sample %d on", e.changed), "; ")
	}
	if table := processCSV(e.rows, e.out.First, e.span.To, m.Rate); table != nil {
		if err := e.write(".process.csv", table); err != nil {
			return err
		}
	} else {
		n.ProcessNo = "no process values were known"
	}
	if e.clip != nil {
		switch state, err := t.State(e.clip.ID); {
		case err == nil && e.out.First != e.clip.From:
			n.StateNote = "the samples begin later than the state of the analysis"
		case err == nil:
			if err := e.write(".state", state); err != nil {
				return err
			}
		case !errors.Is(err, ErrNoState):
			n.StateNote = err.Error()
		}
	}
	body, err := json.MarshalIndent(n, "", "  ")
	if err != nil {
		return err
	}
	return e.write(".json", append(body, '\n'))
}

// write makes a file whole or not at all.
func (e *exporter) write(suffix string, body []byte) error {
	path := e.path + suffix
	if err := os.WriteFile(path+".part", body, 0o644); err != nil {
		return err
	}
	if err := os.Rename(path+".part", path); err != nil {
		return err
	}
	e.out.Files = append(e.out.Files, path)
	return nil
}

// processCSV is the rows as the table that offline work reads: seconds from the first sample, bar absolute, °C. The row
// in force at the first sample stands at 0. A value that is not known is an empty cell. Nil when there is no row.
func processCSV(rows []ProcessRow, first, to int64, rate float64) []byte {
	rows = append([]ProcessRow(nil), rows...)
	sort.SliceStable(rows, func(i, j int) bool { return rows[i].Seq < rows[j].Seq })
	var keep []ProcessRow
	for _, r := range rows {
		r.Seq = max(r.Seq, first)
		switch n := len(keep); {
		case r.Seq >= to:
		case n > 0 && keep[n-1].Seq == r.Seq:
			keep[n-1] = r // the same row carried over by the next segment, or an older one than the one in force
		default:
			keep = append(keep, r)
		}
	}
	if len(keep) == 0 {
		return nil
	}
	stages := 0
	valves := make(map[string]bool)
	for _, r := range keep {
		stages = max(stages, len(r.Stages))
		for id := range r.Covers {
			valves[id] = true
		}
	}
	head := []string{"time_s", "load_step"}
	for s := 1; s <= stages; s++ {
		for _, col := range []string{"p_suction_bar_abs", "p_discharge_bar_abs", "t_suction_c", "t_discharge_c"} {
			head = append(head, fmt.Sprintf("s%d_%s", s, col))
		}
	}
	ids := make([]string, 0, len(valves))
	for id := range valves {
		ids = append(ids, id)
	}
	sort.Strings(ids)
	for _, id := range ids {
		head = append(head, strings.ReplaceAll(id, ".", "_")+"_cover_c")
	}
	var out strings.Builder
	w := csv.NewWriter(&out)
	_ = w.Write(head) // a strings.Builder takes everything
	for _, r := range keep {
		row := []string{number(float64(r.Seq-first)/rate, 6), strconv.Itoa(r.Step)}
		for s := range stages {
			var l LineRow
			if s < len(r.Stages) {
				l = r.Stages[s]
			}
			row = append(row, bar(l.Ps), bar(l.Pd), celsius(l.Ts), celsius(l.Td))
		}
		for _, id := range ids {
			k, ok := r.Covers[id]
			if !ok {
				k = math.NaN()
			}
			row = append(row, celsius(known(k)))
		}
		_ = w.Write(row)
	}
	w.Flush()
	return []byte(out.String())
}

func bar(pa *float64) string {
	if pa == nil {
		return ""
	}
	return number(*pa/1e5, 6)
}

func celsius(k *float64) string {
	if k == nil {
		return ""
	}
	return number(*k-273.15, 4)
}

func number(v float64, decimals int) string {
	return strconv.FormatFloat(math.Round(v*math.Pow10(decimals))/math.Pow10(decimals), 'f', -1, 64)
}
