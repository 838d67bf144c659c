package main

import (
	"bufio"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/station"
)

// The demo's whole story through the daemon as it is shipped, which writes its turn records; then its one clip, which
// reaches from the first sample to the last, is pulled and reviewed. The records are the same, bit for bit: learning run,
// load swings, the leak and its alarms.
func TestSystemTheWholeDemoAgain(t *testing.T) {
	system(t)
	dir := t.TempDir()
	raw, err := os.ReadFile(filepath.Join(configs, "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	file := string(raw)
	for _, c := range [][2]string{{"pre_s: 30", "pre_s: 600"}, {"post_s: 20", "post_s: 600"}, {"  broker: tcp://127.0.0.1:1883", ""}} {
		if !strings.Contains(file, c[0]) {
			t.Fatalf("the example has no %q", c[0])
		}
		file = strings.Replace(file, c[0], c[1], 1)
	}
	skid, state, live := filepath.Join(dir, "skid.yaml"), filepath.Join(dir, "state"), filepath.Join(dir, "live.jsonl")
	if err := os.WriteFile(skid, []byte(file), 0o644); err != nil {
		t.Fatal(err)
	}
	daemon := filepath.Join(os.Getenv("LAPWING_BIN"), "lapwingd")
	if out, errs, code := run(t, 4*time.Minute, daemon, "--skid", skid, "--state", state, "--source", "model:grow", "--learn", "600", "--fast", "--listen", "none", "--records", live); code != 0 {
		t.Fatalf("lapwingd: exit %d\n%s%s", code, out, errs)
	}
	clips, err := station.ClipsIn(state)
	if err != nil {
		t.Fatal(err)
	}
	want := turnRecords(t, live)
	same := map[int64]bool{}
	for _, c := range clips {
		to := filepath.Join(dir, "pulled")
		if out, errs, code := lapwing(t, "pull", c.ID, "--state", state, "--out", to); code != 0 {
			t.Fatalf("pull: exit %d\n%s%s", code, out, errs)
		}
		base := strings.TrimSuffix(one(t, filepath.Join(to, "clip-"+c.ID, "*.wav")), ".wav")
		again := filepath.Join(dir, c.ID+".jsonl")
		out, errs, code := lapwing(t, "review", "--skid", base+".skid.yaml", "--process", base+".process.csv", "--out", again, base+".wav")
		if code != 0 || !strings.Contains(out, "bit for bit") || strings.Contains(out, "another build") {
			t.Fatalf("review: exit %d\n%s%s", code, out, errs)
		}
		got := turnRecords(t, again)
		last := int64(0)
		for n := range got {
			last = max(last, n)
		}
		for n, rec := range got {
			if n > last-3 { // at the end of a clip the next turn's marks are missing
				continue
			}
			if rec != want[n] {
				t.Fatalf("clip %s, turn %d\nlive  %s\nagain %s", c.ID, n, want[n], rec)
			}
			same[n] = true
		}
	}
	t.Logf("%d clips: %d of %d turns the same", len(clips), len(same), len(want))
	if len(same) < len(want)-10 || len(want) < 1000 {
		t.Errorf("%d of %d turns compared", len(same), len(want))
	}
}

// turnRecords reads the turn records of a file by turn number.
func turnRecords(t *testing.T, path string) map[int64]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	out := map[int64]string{}
	sc := bufio.NewScanner(f)
	sc.Buffer(nil, 1<<22)
	for sc.Scan() {
		var head struct {
			Type string `json:"type"`
			Turn int64  `json:"turn"`
		}
		if err := json.Unmarshal(sc.Bytes(), &head); err != nil {
			t.Fatalf("%s: %v", path, err)
		}
		if head.Type == "turn" {
			out[head.Turn] = sc.Text()
		}
	}
	if err := sc.Err(); err != nil {
		t.Fatal(err)
	}
	return out
}
