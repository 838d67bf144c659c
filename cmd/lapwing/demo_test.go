package main

import (
	"bufio"
	"bytes"
	"encoding/binary"
	"encoding/json"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/tape"
)

// TestSystemDemo is the main job as a new user meets it: one command, an alarm that names the right valve on two kinds
// of evidence, a clip that another program opens, and the same analysis again on that clip.
func TestSystemDemo(t *testing.T) {
	system(t)
	dir := filepath.Join(t.TempDir(), "demo")
	out, errs, code := lapwing(t, "demo", "--once", "--fast", "--out", dir)
	if code != 0 {
		t.Fatalf("demo: exit %d\n%s\n%s", code, out, errs)
	}
	// What the control room received, and what it made of it.
	var received []string
	for _, l := range strings.Split(out, "\n") {
		if strings.HasPrefix(l, "  | ") {
			received = append(received, strings.TrimPrefix(l, "  | "))
		}
	}
	room := strings.Join(received, "\n")
	for _, want := range []string{`ALERT +quillmere-c1 +#\d+ +t1\.he\.suction/leaking`, `(?m)^ +vibration +\S`, `(?m)^ +pressure +\S`, `t1\.he\.suction leaking \(suction valves, head end of t1\)`,
		`raw samples protected as clip \S+`, `isolate, depressurise and lock out`, `health of quillmere-c1: running, watching`} {
		if !regexp.MustCompile(want).MatchString(room) {
			t.Errorf("the control room did not receive %s:\n%s", want, room)
		}
	}
	if !strings.Contains(out, "(invented)") {
		t.Error("the demo does not say that its machine is invented")
	}

	wav := one(t, filepath.Join(dir, "clip-*", "*.wav"))
	base := strings.TrimSuffix(wav, ".wav")
	n := readNote(t, base+".json")
	stranger(t, wav, n, filepath.Join(dir, "state", "tape.db"))
	review(t, base, n)
	tables(t, base)
}

func one(t *testing.T, pattern string) string {
	t.Helper()
	m, err := filepath.Glob(pattern)
	if err != nil || len(m) != 1 {
		t.Fatalf("%s: %v %v", pattern, m, err)
	}
	return m[0]
}

type note struct {
	Clip     tape.Clip `json:"clip"`
	First    int64     `json:"first_sample"`
	Samples  int64     `json:"samples"`
	Lost     int64     `json:"samples_lost"`
	Rate     float64   `json:"rate_hz"`
	Channels int       `json:"channels"`
	Bits     int       `json:"bits"`
	Cautions []string  `json:"cautions"`
}

func readNote(t *testing.T, path string) (n note) {
	t.Helper()
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, &n); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if n.Samples < int64(30*n.Rate) || n.Lost != 0 || len(n.Cautions) == 0 || !strings.Contains(n.Clip.Reason, "t1.he.suction leaking") {
		t.Errorf("note %+v", n)
	}
	return n
}

// stranger opens the clip with sox and compares what it reads with the note and, sample by sample, with the tape.
func stranger(t *testing.T, wav string, n note, db string) {
	t.Helper()
	for _, q := range []struct {
		option string
		want   int64
	}{{"-s", n.Samples}, {"-c", int64(n.Channels)}, {"-r", int64(n.Rate)}, {"-b", int64(n.Bits)}} {
		out, errs, code := run(t, time.Minute, tool(t, "soxi"), q.option, wav)
		if got, err := strconv.ParseInt(strings.TrimSpace(out), 10, 64); code != 0 || err != nil || got != q.want {
			t.Errorf("soxi %s says %q (exit %d, %s), the note says %d", q.option, out, code, errs, q.want)
		}
	}
	sox := exec.CommandContext(t.Context(), tool(t, "sox"), wav, "-t", "raw", "-e", "signed-integer", "-b", "32", "-L", "-")
	var errs bytes.Buffer
	sox.Stderr = &errs
	pipe, err := sox.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := sox.Start(); err != nil {
		t.Fatal(err)
	}
	tp, err := tape.OpenRead(db)
	if err != nil {
		t.Fatal(err)
	}
	defer tp.Close()
	r := bufio.NewReaderSize(pipe, 1<<20)
	frame := make([]byte, 4*n.Channels)
	var compared, different int64
	err = tp.ReadClip(n.Clip.ID, func(b *acq.Block) error {
		for i := range b.N {
			if _, err := io.ReadFull(r, frame); err != nil {
				return err
			}
			for ch := range n.Channels {
				// sox puts the code at the top of its 32 bits.
				if int32(binary.LittleEndian.Uint32(frame[4*ch:]))>>(32-n.Bits) != b.Counts[ch][i] {
					different++
				}
			}
			compared++
		}
		return nil
	})
	if err != nil {
		t.Errorf("after %d samples: %v", compared, err)
	}
	if rest, _ := r.Peek(1); len(rest) > 0 {
		t.Error("sox reads more than the tape holds")
	}
	_ = pipe.Close()
	if err := sox.Wait(); err != nil && t.Failed() {
		t.Logf("sox: %v %s", err, errs.String())
	}
	if compared != n.Samples || different != 0 {
		t.Errorf("%d of %d samples compared, %d values different", compared, n.Samples, different)
	}
}

// review runs the analysis again with nothing but the clip's own files.
func review(t *testing.T, base string, n note) {
	t.Helper()
	jsonl := base + ".jsonl"
	out, errs, code := lapwing(t, "review", "--skid", base+".skid.yaml", "--process", base+".process.csv", "--out", jsonl, base+".wav")
	if code != 0 {
		t.Fatalf("review: exit %d\n%s%s", code, out, errs)
	}
	if !strings.Contains(out, "bit for bit") || !strings.Contains(out, "t1.he windows:") || !strings.Contains(out, "t1.he.suction/leaking") {
		t.Errorf("review says\n%s", out)
	}
	f, err := os.Open(jsonl)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	sc := bufio.NewScanner(f)
	sc.Buffer(nil, 1<<22)
	turns, valid, alarms := 0, 0, 0
	last, end := float64(n.First)/n.Rate-1, float64(n.First+n.Samples)/n.Rate // on the live line's clock
	for sc.Scan() {
		var rec struct {
			Type  string  `json:"type"`
			TimeS float64 `json:"t_s"`
			Valid bool    `json:"valid"`
		}
		if err := json.Unmarshal(sc.Bytes(), &rec); err != nil {
			t.Fatalf("line %d: %v", turns+1, err)
		}
		if rec.Type == "transition" {
			alarms++
		}
		if rec.Type != "turn" {
			continue
		}
		if rec.TimeS <= last || rec.TimeS > end {
			t.Fatalf("line %d: a turn at %g s after %g s of a clip that ends at %g s", turns+1, rec.TimeS, last, end)
		}
		last = rec.TimeS
		turns++
		if rec.Valid {
			valid++
		}
	}
	if err := sc.Err(); err != nil {
		t.Fatal(err)
	}
	// 629 to 740 turns a minute; the first and last few are not whole.
	if least := int(float64(n.Samples)/n.Rate*600/60) - 5; turns < least || valid < turns*95/100 {
		t.Errorf("%d turns, %d valid; at least %d were played", turns, valid, least)
	}
	if alarms == 0 {
		t.Error("the review of the alarm's clip raises no alarm")
	}
}
