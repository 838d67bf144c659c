package main_test

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/acq/wav"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// bench is a folder with a built hand tool, a recording and its skid file.
type bench struct{ dir string }

// hurt is when a leak begins: the turns before it are what the reviews learn from.
const hurt, healthy = 3.85, "0:60"

func newBench(t *testing.T) bench {
	t.Helper()
	b := bench{t.TempDir()}
	if out, err := exec.Command("go", "build", "-o", b.path("lapwing"), ".").CombinedOutput(); err != nil {
		t.Fatalf("go build: %v\n%s", err, out)
	}
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range [][2]string{{"sampling_hz: 51200", "sampling_hz: 20480"}, // small and quick
		{"impact_band_hz: [2000, 20000]", "impact_band_hz: [2000, 8000]"}, {"leak_band_hz: [10000, 20000]", "leak_band_hz: [5000, 8000]"}} {
		if raw = bytes.Replace(raw, []byte(c[0]), []byte(c[1]), 1); !bytes.Contains(raw, []byte(c[1])) {
			t.Fatalf("the example has no %q", c[0])
		}
	}
	b.write(t, "skid.yaml", string(raw))
	sk, err := skid.Load(b.path("skid.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	src, err := acqmodel.Open(sk, model.Script{RPM: 960}.Add(hurt, 0, model.ValveLeak, "t1.he.s1", 60*model.MM2), acqmodel.Options{Seed: 5, Duration: 7000 * time.Millisecond})
	if err != nil {
		t.Fatal(err)
	}
	info := src.Info()
	w, err := wav.Create(b.path("rec.wav"), wav.WriterOptions{Rate: info.Rate, Channels: info.Channels, Bits: info.Bits, Skid: sk.Hash})
	if err != nil {
		t.Fatal(err)
	}
	var block acq.Block
	for {
		err := src.Read(t.Context(), &block)
		if errors.Is(err, io.EOF) {
			break
		}
		if err == nil {
			err = w.Write(&block)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b
}

func (b bench) path(name string) string { return filepath.Join(b.dir, name) }

func (b bench) write(t *testing.T, name, text string) {
	t.Helper()
	if err := os.WriteFile(b.path(name), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}

// review runs the tool in the folder, as its user does.
func (b bench) review(args ...string) (said, complained string, err error) {
	cmd := exec.Command(b.path("lapwing"), append([]string{"review"}, args...)...)
	cmd.Dir = b.dir
	var out, bad bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &bad
	err = cmd.Run()
	return out.String(), bad.String(), err
}

// object is a record as a reader without our types finds it.
type object map[string]any

func (o object) child(key string) object { m, _ := o[key].(map[string]any); return m }

func (o object) list(key string) (out []object) {
	l, _ := o[key].([]any)
	for _, v := range l {
		m, _ := v.(map[string]any)
		out = append(out, m)
	}
	return out
}

func (o object) number(t *testing.T, key string) float64 {
	t.Helper()
	v, ok := o[key].(float64)
	if !ok {
		t.Fatalf("no number %s in %v", key, o)
	}
	return v
}

// records reads a file of records by type.
func (b bench) records(t *testing.T, name string) map[string][]object {
	t.Helper()
	f, err := os.Open(b.path(name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	out := map[string][]object{}
	sc := bufio.NewScanner(f)
	sc.Buffer(nil, 1<<20)
	for sc.Scan() {
		var o object
		if err := json.Unmarshal(sc.Bytes(), &o); err != nil {
			t.Fatalf("%v: %s", err, sc.Text())
		}
		kind, _ := o["type"].(string)
		out[kind] = append(out[kind], o)
	}
	if err := sc.Err(); err != nil {
		t.Fatal(err)
	}
	return out
}

func TestReview(t *testing.T) {
	b := newBench(t)
	said, bad, err := b.review("--skid", "skid.yaml", "rec.wav", "--learn", healthy, "--save-baseline", "base.json", "--out", "turns.jsonl")
	if err != nil {
		t.Fatal(err, bad)
	}
	for _, want := range []string{"t1.he windows:  following", "baseline learnt from turns", "t1.he.suction/leaking", "t1.he.suction leaking (suction valves, head end of t1)", "lock out"} {
		if !strings.Contains(said, want) {
			t.Errorf("the summary lacks %q:\n%s", want, said)
		}
	}
	recs := b.records(t, "turns.jsonl")
	t.Run("turns", func(t *testing.T) { checkTurns(t, recs["turn"]) })
	t.Run("judgement", func(t *testing.T) {
		if len(recs["finding"]) == 0 || len(recs["transition"]) == 0 || len(recs) != 3 {
			t.Fatalf("%d findings, %d transitions, %d types", len(recs["finding"]), len(recs["transition"]), len(recs))
		}
		f, tr := recs["finding"][0], recs["transition"][0]
		if f["subject"] != "t1.he.suction" || f["kind"] != "leaking" || f.number(t, "t_s") < hurt || f["sentence"] == "" || len(f.list("evidence")) < 2 {
			t.Errorf("finding %v", f)
		}
		if tr["key"] != "t1.he.suction/leaking" || tr["to"] != "unacknowledged" || tr.number(t, "t_s") < hurt || !strings.Contains(tr["caution"].(string), "lock out") {
			t.Errorf("transition %v", tr)
		}
		if at, ok := tr["at"]; ok {
			t.Errorf("the recording does not tell when it was made, the transition says %v", at)
		}
	})
	t.Run("again by the kept baseline", func(t *testing.T) {
		if _, bad, err := b.review("--skid", "skid.yaml", "rec.wav", "--baseline", "base.json", "--out", "again.jsonl"); err != nil {
			t.Fatal(err, bad)
		}
		if again := b.records(t, "again.jsonl"); len(again["transition"]) == 0 || len(again["turn"]) != len(recs["turn"]) {
			t.Errorf("%d transitions, %d turns", len(again["transition"]), len(again["turn"]))
		}
	})
	t.Run("to standard output", func(t *testing.T) {
		said, bad, err := b.review("--skid", "skid.yaml", "rec.wav", "--out", "-")
		if n := strings.Count(said, "\n"); err != nil || n != len(recs["turn"]) || !strings.HasPrefix(said, `{"type":"turn"`) || !strings.Contains(bad, "measured only") {
			t.Errorf("%v: %d lines, beside them %q", err, n, bad)
		}
	})
	t.Run("trouble", func(t *testing.T) { checkTrouble(t, b, len(recs["turn"])) })
}

// checkTurns looks for all that the records of a review are to hold.
func checkTurns(t *testing.T, turns []object) {
	last, valid := -1.0, 0
	for _, r := range turns {
		n, at := r.number(t, "turn"), r.number(t, "t_s")
		if n <= last || at < 0 || at > 7 {
			t.Errorf("turn %g at %g s after turn %g", n, at, last)
		}
		last = n
		if r["valid"] != true {
			if reason, _ := r["reason"].(string); reason == "" || r["throws"] != nil {
				t.Errorf("turn %g is not valid and says %v", n, r)
			}
			continue
		}
		valid++
		if len(r.list("throws")) != 2 {
			t.Fatalf("turn %g has throws %v", n, r["throws"])
		}
		for _, th := range r.list("throws") {
			if rpm := th.number(t, "speed_rpm"); rpm < 950 || rpm > 970 {
				t.Errorf("turn %g runs at %g rpm", n, rpm)
			}
			for _, m := range []string{"rod_load_max_kn", "rod_load_min_kn", "reversal_deg", "power_kw"} {
				th.child("values").number(t, m)
			}
			if len(th.list("ends")) != 2 {
				t.Fatalf("turn %g has ends %v", n, th["ends"])
			}
			for _, end := range th.list("ends") {
				for _, m := range []string{"p_suction_bar_abs", "p_discharge_bar_abs", "indicated_work_j", "indicated_power_kw"} {
					end.child("values").number(t, m)
				}
				for _, m := range []string{"suction_opens_deg", "discharge_opens_deg", "ve_suction_percent", "ve_discharge_percent", "capacity_suction_kg_h",
					"flow_balance", "n_comp_early", "n_exp_late", "t_adiabatic_c", "t_excess_k"} { // there, or absent with a reason
					_, there := end.child("values")[m].(float64)
					if why, _ := end.child("absent")[m].(string); there == (why != "") {
						t.Errorf("turn %g: %s is there: %v, absent because %q", n, m, there, why)
					}
				}
				if len(end.list("events")) != 4 {
					t.Fatalf("turn %g has events %v", n, end["events"])
				}
				for _, ev := range end.list("events") {
					win, _ := ev["window_deg"].([]any)
					if ev["state"] != "following" && ev["state"] != "holding" || len(win) != 2 || !(win[0].(float64) < win[1].(float64)) {
						t.Errorf("turn %g: event %v", n, ev)
						continue
					}
					if ev.child("values").number(t, "peak_g") < ev.child("values").number(t, "rms_g") {
						t.Errorf("turn %g: peak below RMS in %v", n, ev)
					}
				}
			}
		}
	}
	if valid < 85 {
		t.Errorf("%d valid turns of %d", valid, len(turns))
	}
}

// checkTrouble gives the tool what a tired person gives it. turns is what the whole recording has.
func checkTrouble(t *testing.T, b bench, turns int) {
	rec, err := os.ReadFile(b.path("rec.wav"))
	if err != nil {
		t.Fatal(err)
	}
	b.write(t, "cut.wav", string(rec[:len(rec)/2]))
	b.write(t, "empty.wav", "")
	b.write(t, "text.wav", "Dear diary, the compressor was loud today, and nobody wrote it down.\n")
	b.write(t, "step.csv", "time_s,load_step\n0,9\n")
	b.write(t, "column.csv", "time_s,pressure\n0,9\n")
	b.write(t, "old.jsonl", "what was found yesterday\n")
	two, err := wav.Create(b.path("two.wav"), wav.WriterOptions{Rate: 20480, Channels: 2, Bits: 24})
	if err == nil {
		err = errors.Join(two.Write(&acq.Block{N: 1, Counts: [][]int32{{0}, {0}}}), two.Close())
	}
	if err != nil {
		t.Fatal(err)
	}
	whole := []string{"--skid", "skid.yaml", "rec.wav"}
	for _, c := range []struct {
		name string
		args []string
		want string // in what it complains of
		out  int    // turn records in out.jsonl at the least; -1: no file is made
	}{
		{"truncated", []string{"--skid", "skid.yaml", "cut.wav"}, "truncated", turns/2 - 3},
		{"empty", []string{"--skid", "skid.yaml", "empty.wav"}, "not a readable WAVE file", -1},
		{"no wav", []string{"--skid", "skid.yaml", "text.wav"}, "not a readable WAVE file", -1},
		{"not there", []string{"--skid", "skid.yaml", "nowhere.wav"}, "no such file", -1},
		{"channels", []string{"--skid", "skid.yaml", "two.wav"}, "two.wav has 2 channels, the skid file uses input 6", -1},
		{"skid file", []string{"--skid", "text.wav", "rec.wav"}, "text.wav", -1},
		{"load step of the process file", append(whole, "--process", "step.csv"), "line 2: column load_step: the skid file has no load step 9", -1},
		{"column of the process file", append(whole, "--process", "column.csv"), `column "pressure" is unknown`, -1},
		{"learning beyond the end", append(whole, "--learn", "0:5000"), "never ended: it was to end with turn 4999, and the last valid turn", turns},
		{"learning too little", append(whole, "--learn", "0:20"), "steady turns", turns},
		{"learning nonsense", append(whole, "--learn", "60"), "write FIRST:END", -1},
		{"baseline and learning", append(whole, "--learn", healthy, "--baseline", "base.json"), "either learnt or given", -1},
		{"no baseline file", append(whole, "--baseline", "skid.yaml"), "skid.yaml", -1},
		{"nothing to save", append(whole, "--save-baseline", "b.json"), "no baseline to save", -1},
	} {
		t.Run(c.name, func(t *testing.T) {
			_ = os.Remove(b.path("out.jsonl"))
			_, bad, err := b.review(append(c.args, "--out", "out.jsonl")...)
			var exit *exec.ExitError
			if !errors.As(err, &exit) || exit.ExitCode() != 1 || !strings.Contains(bad, c.want) || strings.Contains(bad, "goroutine") {
				t.Errorf("ends with %v and says %q, want %q", err, bad, c.want)
			}
			_, serr := os.Stat(b.path("out.jsonl"))
			if c.out < 0 && serr == nil {
				t.Error("records of nothing")
			}
			if c.out >= 0 && (serr != nil || len(b.records(t, "out.jsonl")["turn"]) < c.out) {
				t.Errorf("%v, fewer than %d turns", serr, c.out)
			}
		})
	}
	t.Run("where no record can go", func(t *testing.T) {
		for out, want := range map[string]string{"rec.wav": "is read by this review", "skid.yaml": "is read by this review", "nowhere/out.jsonl": "no such file", ".": "directory"} {
			if _, bad, err := b.review(append(whole, "--out", out)...); err == nil || !strings.Contains(bad, want) {
				t.Errorf("%s: %v, %q, want %q", out, err, bad, want)
			}
		}
		if now, err := os.ReadFile(b.path("rec.wav")); err != nil || !bytes.Equal(now, rec) {
			t.Error("the recording was overwritten")
		}
		if _, err := os.Stat("/dev/full"); err == nil {
			if _, bad, err := b.review(append(whole, "--out", "/dev/full")...); err == nil || strings.Count(bad, "no space left") != 1 {
				t.Errorf("a full disk: %v, %q", err, bad)
			}
		}
		if _, _, err := b.review("--skid", "skid.yaml", "nowhere.wav", "--out", "old.jsonl"); err == nil {
			t.Error("a recording that is not there was reviewed")
		}
		if old, err := os.ReadFile(b.path("old.jsonl")); err != nil || string(old) != "what was found yesterday\n" {
			t.Errorf("the records of before are gone: %q, %v", old, err)
		}
	})
}
