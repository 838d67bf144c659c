package tape

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/skid"
)

// readWAV gives a recording's samples and what its source says of itself.
func readWAV(t *testing.T, path string) (acq.Info, []sample) {
	t.Helper()
	src, err := wav.Open(path, wav.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer func() {
		if err := src.Close(); err != nil {
			t.Error(err)
		}
	}()
	var out []sample
	for {
		var b acq.Block
		err := src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			return src.Info(), out
		}
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, samplesOf(&b)...)
	}
}

func readNote(t *testing.T, path string) note {
	t.Helper()
	body, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var n note
	if err := json.Unmarshal(body, &n); err != nil {
		t.Fatal(err)
	}
	return n
}

// A tape with a gap and an overload, process values that change, and a clip over all of it.
func recorded(t *testing.T, dir string, opt Options) *Tape {
	tp := open(t, dir, opt)
	row := func(step int, ps float64) skid.Process {
		return skid.Process{Known: true, Step: step, Stages: []skid.Line{{Ps: ps, Pd: 60e5, Ts: 293.15, Td: math.NaN()}},
			Covers: map[string]float64{"t1.he.d2": 353.15}}
	}
	tp.Process(0, skid.Process{}) // not known: leaves no trace
	tp.Process(0, row(1, 20e5))
	feed(tp, 0, 1000)
	tp.Process(1000, row(2, 20.5e5))
	b := block(1250, 100, 3)
	b.Lost, b.Note = 250, "cable"
	tp.Append(b)
	b = block(1350, 150, 3)
	b.Clip, b.Note = true, "overload"
	tp.Append(b)
	feed(tp, 1500, 3000)
	flush(t, tp)
	protect(t, tp, Clip{ID: "a", Reason: "t1.he.suction leaking, confirmed", AlarmID: 12, From: 500, To: 2500})
	flush(t, tp)
	return tp
}

func TestAnExportedClipReadsBackAsItWasSampled(t *testing.T) {
	opt := small()
	tp := recorded(t, t.TempDir(), opt)
	dst := filepath.Join(t.TempDir(), "event")
	out, err := tp.ExportClip(dst+".wav", "a")
	if err != nil {
		t.Fatal(err)
	}
	if out.Samples != 1750 || out.Lost != 250 || out.First != 500 || len(out.Files) != 4 {
		t.Errorf("%+v", out)
	}
	var want []sample
	if err := tp.ReadClip("a", collect(&want)); err != nil {
		t.Fatal(err)
	}
	info, got := readWAV(t, dst+".wav")
	if d := diff(got, want); d != "" {
		t.Error(d)
	}
	if info.Rate != 1000 || info.Channels != 3 || info.Bits != 24 || !info.Start.Equal(testStart) {
		t.Errorf("%+v", info)
	}
	if file, err := os.ReadFile(dst + ".skid.yaml"); err != nil || string(file) != string(opt.Skid) {
		t.Errorf("%q %v", file, err)
	}
	csv, err := os.ReadFile(dst + ".process.csv")
	wantCSV := "time_s,load_step,s1_p_suction_bar_abs,s1_p_discharge_bar_abs,s1_t_suction_c,s1_t_discharge_c,t1_he_d2_cover_c\n" +
		"0,1,20,60,20,,80\n0.5,2,20.5,60,20,,80\n"
	if err != nil || string(csv) != wantCSV {
		t.Errorf("%v\n%s\nwant\n%s", err, csv, wantCSV)
	}
	n := readNote(t, dst+".json")
	if n.Clip == nil || n.Clip.Reason != "t1.he.suction leaking, confirmed" || n.Skid != SkidHash(opt.Skid) || n.Lost != 250 ||
		n.FirstUTC != "2026-03-01T06:00:00.5Z" {
		t.Errorf("%+v", n)
	}
	if all := strings.Join(n.Cautions, " "); !strings.Contains(all, "depressurise") || !strings.Contains(all, "not a protection system") {
		t.Errorf("cautions: %s", all)
	}
	soxCount(t, dst+".wav", "1750")
}

// soxCount asks another program how many samples a recording has.
func soxCount(t *testing.T, path, want string) {
	t.Helper()
	exe, err := exec.LookPath("soxi")
	if err != nil {
		t.Log("soxi is not installed: no other program has read the export")
		return
	}
	got, err := exec.Command(exe, "-s", path).CombinedOutput()
	if err != nil || strings.TrimSpace(string(got)) != want {
		t.Errorf("soxi says %q samples, want %s (%v)", got, want, err)
	}
}

func TestExportOfASpanWithoutExtras(t *testing.T) {
	opt := small()
	opt.Skid, opt.Info.Bits = nil, 18
	tp := open(t, t.TempDir(), opt)
	for seq := int64(0); seq < 600; seq += 100 {
		b := block(seq, 100, 3)
		for _, x := range b.Counts {
			for i := range x {
				x[i] >>= 6 // codes of 18 bits
			}
		}
		tp.Append(b)
	}
	flush(t, tp)
	dst := filepath.Join(t.TempDir(), "span")
	out, err := tp.ExportSpan(dst, Span{tp.Run(), 150, 420})
	if err != nil || out.Samples != 270 || len(out.Files) != 2 {
		t.Errorf("%+v %v", out, err)
	}
	var want []sample
	if err := tp.Read(150, 420, collect(&want)); err != nil {
		t.Fatal(err)
	}
	info, got := readWAV(t, dst+".wav")
	if d := diff(got, want); d != "" {
		t.Error(d)
	}
	if info.Bits != 18 {
		t.Errorf("codes of %d bits", info.Bits)
	}
	if n := readNote(t, dst+".json"); n.SkidNote == "" || n.ProcessNo == "" || n.Clip != nil {
		t.Errorf("%+v", n)
	}
	if _, err := tp.ExportSpan(dst+"2", Span{tp.Run(), 5000, 6000}); err == nil || !strings.Contains(err.Error(), "nothing of it") {
		t.Errorf("%v", err)
	}
	if _, err := tp.ExportClip(dst, "x"); !errors.Is(err, ErrNoClip) {
		t.Errorf("%v", err)
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(dst), "*.part")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

func TestADamagedClipIsExportedWithAGap(t *testing.T) {
	dir, opt := t.TempDir(), small()
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	feed(tp, 0, 1000)
	protect(t, tp, Clip{ID: "a", Run: 1, From: 0, To: 1000})
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	edit(t, filepath.Join(dir, "clips.db"), func(tx *bolt.Tx) error { return flipIn(channelKey(0), 50)(tx) })
	if tp, err = Open(filepath.Join(dir, "tape.db"), opt); err != nil {
		t.Fatal(err)
	}
	defer func() {
		if err := tp.Close(); err != nil {
			t.Error(err)
		}
	}()
	dst := filepath.Join(t.TempDir(), "event")
	out, err := tp.ExportClip(dst, "a")
	var damage *DamageError
	if !errors.As(err, &damage) || damage.Segments[0].From != 400 || out.Lost != 200 || out.Samples != 800 {
		t.Errorf("%+v %v", out, err)
	}
	if n := readNote(t, dst+".json"); !strings.Contains(n.Damage, "checksum") {
		t.Errorf("%+v", n)
	}
	if _, got := readWAV(t, dst+".wav"); len(got) != 800 || got[400].seq != 600 || got[400].lost != 200 {
		t.Errorf("%d samples", len(got))
	}
}
