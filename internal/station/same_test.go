package station

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/acq/wav"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/plant"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// take is a recording with its process values and its skid file, on disk.
type take struct {
	sk             *skid.Skid
	wav, csv, skid string
}

const (
	takeLong  = 8   // s
	takeHurt  = 4.0 // s, a leak begins
	takeStep  = 6.9 // s, another load step
	takeGap   = 7.5 // s, samples are lost
	takeLearn = 46  // steady turns to learn from, of the 60 before the leak
)

// recorded writes a modelled recording: two throws, a leak, another load step, and a tenth of a second of samples
// lost.
func recorded(t testing.TB) take {
	t.Helper()
	dir := t.TempDir()
	r := take{wav: filepath.Join(dir, "rec.wav"), csv: filepath.Join(dir, "process.csv"), skid: filepath.Join(dir, "skid.yaml")}
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err == nil {
		for _, c := range [][2]string{{"  broker: tcp://127.0.0.1:1883", ""}, {"rod_load_max_kn, high: 110, deadband: 2, on_delay_s: 10", "rod_load_max_kn, high: 30, deadband: 2, on_delay_s: 1"},
			{"sampling_hz: 51200", "sampling_hz: 20480"}, // small and quick
			{"impact_band_hz: [2000, 20000]", "impact_band_hz: [2000, 8000]"}, {"leak_band_hz: [10000, 20000]", "leak_band_hz: [5000, 8000]"}} {
			if raw = bytes.Replace(raw, []byte(c[0]), []byte(c[1]), 1); !bytes.Contains(raw, []byte(c[1])) {
				t.Fatalf("the example has no %q", c[0])
			}
		}
		err = os.WriteFile(r.skid, raw, 0o644)
	}
	if err == nil {
		r.sk, err = skid.Load(r.skid)
	}
	if err != nil {
		t.Fatal(err)
	}
	s := model.Script{RPM: 960}.Add(takeHurt, 0, model.ValveLeak, "t1.he.s1", 60*model.MM2).Add(takeStep, 0, model.LoadStep, "", 1)
	src, err := acqmodel.Open(r.sk, s, acqmodel.Options{Seed: 5, Duration: takeLong * time.Second})
	if err != nil {
		t.Fatal(err)
	}
	info := src.Info()
	w, err := wav.Create(r.wav, wav.WriterOptions{Rate: info.Rate, Channels: info.Channels, Bits: info.Bits, Skid: r.sk.Hash})
	if err != nil {
		t.Fatal(err)
	}
	var lost int64
	var b acq.Block
	rows := [][]string{plant.Columns(r.sk)}
	for {
		err := src.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		at := float64(b.Seq0) / info.Rate
		if second := float64(len(rows) - 1); at >= second {
			rows = append(rows, cells(rows[0], second, src.Process(second)))
		}
		if at >= takeGap && at < takeGap+0.1 {
			lost += int64(b.N)
			continue
		}
		b.Lost, lost = lost, 0
		if err := w.Write(&b); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	f, err := os.Create(r.csv)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(csv.NewWriter(f).WriteAll(rows), f.Close()); err != nil {
		t.Fatal(err)
	}
	return r
}

// cells is a row of process values under the given columns, in people's units.
func cells(columns []string, at float64, p skid.Process) []string {
	out := make([]string, len(columns))
	for i, c := range columns {
		var v float64
		switch {
		case c == "time_s":
			v = at
		case c == "load_step":
			v = float64(p.Step)
		case strings.HasSuffix(c, "_p_suction_bar_abs"):
			v = p.Stages[0].Ps / 1e5
		case strings.HasSuffix(c, "_p_discharge_bar_abs"):
			v = p.Stages[0].Pd / 1e5
		case strings.HasSuffix(c, "_t_suction_c"):
			v = p.Stages[0].Ts - 273.15
		case strings.HasSuffix(c, "_t_discharge_c"):
			v = p.Stages[0].Td - 273.15
		default:
			v = p.Covers[strings.ReplaceAll(strings.TrimSuffix(c, "_cover_c"), "_", ".")] - 273.15
		}
		if !math.IsNaN(v) {
			out[i] = strconv.FormatFloat(v, 'f', 7, 64)
		}
	}
	return out
}

// lines is a review's file, one record each.
func (r take) lines(t testing.TB, o ReviewOptions) []string {
	t.Helper()
	var out bytes.Buffer
	o.SkidFile, o.Recording, o.ProcessCSV, o.Out = r.skid, r.wav, r.csv, &out
	if err := Review(t.Context(), o); err != nil {
		t.Fatal(err)
	}
	return strings.Split(strings.TrimSpace(out.String()), "\n")
}

// of picks the records of a type.
func of(lines []string, kind string) (out []string) {
	for _, l := range lines {
		if strings.HasPrefix(l, `{"type":"`+kind+`"`) {
			out = append(out, l)
		}
	}
	return out
}

// live runs the daemon's own line on the recording, and gives its turn records, its journal and its baseline.
func (r take) live(t testing.TB, learn int) (turns []string, journal []alarm.Transition, learnt int64) {
	t.Helper()
	s, err := Open(Options{SkidFile: r.skid, State: t.TempDir(), Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Learn: learn, Listen: "none",
		Broker: "", OnTurn: func(rec *wire.Turn) {
			b, err := json.Marshal(rec)
			if err != nil {
				t.Error(err)
			}
			turns = append(turns, string(b))
		}})
	if err != nil {
		t.Fatal(err)
	}
	defer func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	}()
	ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
	defer cancel()
	if err := s.Run(ctx); err != nil || ctx.Err() != nil {
		t.Fatal(err, ctx.Err())
	}
	if journal, err = s.ledger.Journal(0, 1000); err != nil {
		t.Fatal(err)
	}
	if b, err := s.baseline(); err != nil {
		t.Fatal(err)
	} else if b != nil {
		learnt = b.Turn1
	}
	return turns, journal, learnt
}

// blocks reads the whole recording.
func (r take) blocks(t testing.TB) (acq.Info, []acq.Block) {
	t.Helper()
	src, err := wav.Open(r.wav, wav.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	var out []acq.Block
	var b acq.Block
	for {
		err := src.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) {
			return src.Info(), out
		}
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, cloneBlock(&b))
	}
}

// differ tells where two lists of lines part.
func differ(a, b []string) string {
	for i := range min(len(a), len(b)) {
		if a[i] != b[i] {
			k := 0
			for k < min(len(a[i]), len(b[i])) && a[i][k] == b[i][k] {
				k++
			}
			from := max(0, k-60)
			return fmt.Sprintf("line %d: …%.120s… against …%.120s…", i, a[i][from:], b[i][from:])
		}
	}
	if len(a) != len(b) {
		return fmt.Sprintf("%d lines against %d", len(a), len(b))
	}
	return ""
}

// TestLiveAndOfflineAreTheSame: the daemon fed with a recording, and the review of it, give the same turn records byte
// for byte, and the same alarms.
func TestLiveAndOfflineAreTheSame(t *testing.T) {
	t.Parallel()
	r := recorded(t)
	turns, journal, learnt := r.live(t, takeLearn)
	off := r.lines(t, ReviewOptions{LearnFrom: 0, LearnTo: learnt + 1})
	if d := differ(turns, of(off, "turn")); d != "" {
		t.Error("live against offline: " + d)
	}
	// The live learning run ends after so many steady turns, the offline one at a turn: told the same turn, both have
	// learnt the same, and raise the same alarms at the same samples.
	said := of(off, "transition")
	if len(said) == 0 || len(journal) != len(said) {
		t.Fatalf("%d transitions in the journal, %d offline; want the same and at least one", len(journal), len(said))
	}
	for i := range journal {
		line := wire.TransitionRecord(0, &journal[i])
		var want wire.TransitionLine
		if err := json.Unmarshal([]byte(said[i]), &want); err != nil {
			t.Fatal(err)
		}
		if line.Key != want.Key || line.To != want.To || line.Turn != want.Turn || line.Samples != want.Samples || line.Sentence != want.Sentence {
			t.Errorf("live: %+v\noffline: %+v", line, want)
		}
	}
	t.Run("cores", func(t *testing.T) { r.cores(t, off, learnt+1) })
	t.Run("cuts", func(t *testing.T) { r.cuts(t, off, learnt+1) })
	t.Run("clip", func(t *testing.T) { r.clip(t, of(off, "turn")) })
}

// cuts feeds the line with blocks of other lengths: one sample, some, thousands.
func (r take) cuts(t *testing.T, want []string, learnTo int64) {
	info, blocks := r.blocks(t)
	f, err := os.Open(r.csv)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	series, err := plant.ReadCSV(f, r.sk)
	if err != nil {
		t.Fatal(err)
	}
	h := newHeld()
	line, err := NewLine(r.sk, info, h.at, LearnPlan{To: learnTo}, nil, alarm.New(AlarmTiming(r.sk)))
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	emit := func(o *Output) {
		put := func(v any) {
			b, err := json.Marshal(v)
			if err != nil {
				t.Fatal(err)
			}
			got = append(got, string(b))
		}
		put(o.Record)
		for i := range o.News {
			put(wire.FindingRecord(o.Record.TimeS, &o.News[i], line.Layout()))
		}
		for i := range o.Transitions {
			l := wire.TransitionRecord(o.Record.TimeS, &o.Transitions[i])
			l.At = time.Time{}
			put(l)
		}
	}
	rnd := rand.New(rand.NewPCG(1, 2))
	var clock rowClock
	// Joined first, so that blocks also grow beyond those of the file.
	for _, stretch := range joined(blocks) {
		for _, b := range acqtest.Cut(stretch, func(int) int { return 1 + rnd.IntN(1<<(1+rnd.IntN(14))) }) {
			for _, row := range clock.rows(&b, info.Rate, processAt(series.At).from(0)) {
				h.put(row)
			}
			if err := line.Add(&b, emit); err != nil {
				t.Fatal(err)
			}
		}
	}
	line.Flush(emit)
	if len(of(got, "finding")) == 0 || len(of(got, "transition")) == 0 {
		t.Fatalf("%d findings, %d transitions: nothing was judged", len(of(got, "finding")), len(of(got, "transition")))
	}
	if d := differ(got, want); d != "" {
		t.Error("other blocks against the review: " + d)
	}
}

// joined puts blocks between which nothing is lost into one.
func joined(blocks []acq.Block) (out []acq.Block) {
	for _, b := range blocks {
		n := len(out)
		if n == 0 || b.Lost > 0 {
			c := b
			c.Counts = make([][]int32, len(b.Counts))
			for i := range c.Counts {
				c.Counts[i] = append([]int32(nil), b.Counts[i]...)
			}
			out = append(out, c)
			continue
		}
		last := &out[n-1]
		for i := range last.Counts {
			last.Counts[i] = append(last.Counts[i], b.Counts[i]...)
		}
		last.N += b.N
	}
	return out
}

// clip cuts a piece out, as the tape does: sample numbers go on counting from where they were, times and process values
// count from the piece's first sample. The numbers must be those of the whole recording.
func (r take) clip(t *testing.T, whole []string) {
	const from, to = 1.37, 3.4 // s
	info, blocks := r.blocks(t)
	c := take{sk: r.sk, skid: r.skid, wav: filepath.Join(t.TempDir(), "clip.wav"), csv: filepath.Join(t.TempDir(), "clip.csv")}
	w, err := wav.Create(c.wav, wav.WriterOptions{Rate: info.Rate, Channels: info.Channels, Bits: 24, Skid: r.sk.Hash})
	if err != nil {
		t.Fatal(err)
	}
	first := int64(math.Round(from * info.Rate))
	start := float64(first) / info.Rate
	for _, b := range acqtest.Cut(joined(blocks)[0], func(i int) int {
		if i == 0 {
			return int(first)
		}
		return int(info.Rate)
	}) {
		if b.Seq0 < first || float64(b.Seq0) > to*info.Rate {
			continue
		}
		if err := w.Write(&b); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	raw, err := os.ReadFile(r.csv)
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(bytes.NewReader(raw)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	cut := rows[:1]
	for _, row := range rows[1:] {
		at, err := strconv.ParseFloat(row[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		if at+1 > start {
			row[0] = strconv.FormatFloat(max(0, at-start), 'f', 6, 64)
			cut = append(cut, row)
		}
	}
	f, err := os.Create(c.csv)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(csv.NewWriter(f).WriteAll(cut), f.Close()); err != nil {
		t.Fatal(err)
	}

	off := of(c.lines(t, ReviewOptions{}), "turn")
	turns, _, _ := c.live(t, 0)
	if d := differ(turns, off); d != "" {
		t.Error("a clip, live against offline: " + d)
	}
	known := map[int64]wire.Turn{} // by the head-end dead centre's place, µs
	parse := func(line string) (rec wire.Turn) {
		if err := json.Unmarshal([]byte(line), &rec); err != nil {
			t.Fatal(err)
		}
		return rec
	}
	for _, l := range whole {
		if rec := parse(l); rec.Valid {
			known[int64(math.Round(rec.TimeS*1e4))] = rec
		}
	}
	same := 0
	for _, l := range off {
		rec := parse(l)
		if rec.TimeS < 0 || rec.TimeS > to-from+1 {
			t.Errorf("turn %d of the clip at %g s", rec.Turn, rec.TimeS)
		}
		if !rec.Valid {
			continue
		}
		full, ok := known[int64(math.Round((rec.TimeS+start)*1e4))]
		if !ok {
			t.Errorf("turn %d of the clip at %g s is none of the recording's", rec.Turn, rec.TimeS)
			continue
		}
		if rec.Samples != full.Samples || len(rec.Throws) != len(full.Throws) {
			t.Errorf("turn at %g s: samples %v, in the whole recording %v", rec.TimeS, rec.Samples, full.Samples)
			continue
		}
		for i := range rec.Throws {
			a, b := rec.Throws[i], full.Throws[i]
			if math.Abs(*a.TimeS+start-*b.TimeS) > 2e-7 || a.Step != b.Step {
				t.Errorf("turn at %g s: throw %s at %g s, load step %d; in the whole recording %g s, %d", rec.TimeS, a.ID, *a.TimeS, a.Step, *b.TimeS, b.Step)
			}
			for e := range a.Ends {
				for _, name := range []string{"indicated_work_j", "p_max_bar_abs", "ratio_line", "t_adiabatic_c"} { // none that leans on turns before
					if a.Ends[e].Values[name] != b.Ends[e].Values[name] {
						t.Fatalf("turn at %g s: %s.%s %s is %v, in the whole recording %v", rec.TimeS, a.ID, a.Ends[e].End, name, a.Ends[e].Values[name], b.Ends[e].Values[name])
					}
				}
			}
			same++
		}
	}
	if same < 2*20 {
		t.Errorf("only %d throws compared", same)
	}
}
