package station

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq/wav"
	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

// A pulled clip, reviewed, gives the live turn records again, bit for bit, from its first whole turn on: turn numbers,
// times, windows, measures, duty, findings and transitions. The recording learns, has a leak, another load step and a gap.
func TestAClipReviewedIsTheLiveLineAgain(t *testing.T) {
	t.Parallel()
	r := recorded(t)
	raw, err := os.ReadFile(r.skid)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range [][2]string{{"pre_s: 30", "pre_s: 0.5"}, {"post_s: 20", "post_s: 2"}} {
		raw = bytes.Replace(raw, []byte(c[0]), []byte(c[1]), 1)
	}
	if err := os.WriteFile(r.skid, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	state, live := t.TempDir(), map[int64]string{}
	s, err := Open(Options{SkidFile: r.skid, State: state, Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Learn: takeLearn, Listen: "none",
		OnTurn: func(rec *wire.Turn) {
			b, err := json.Marshal(rec)
			if err != nil {
				t.Error(err)
			}
			live[rec.Turn] = string(b)
		}})
	if err != nil {
		t.Fatal(err)
	}
	s.states.every = 1200 * time.Millisecond
	ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
	defer cancel()
	if err := errors.Join(s.Run(ctx), ctx.Err()); err != nil {
		t.Fatal(err)
	}
	journal, err := s.ledger.Journal(0, 1000)
	if err := errors.Join(err, s.Close()); err != nil {
		t.Fatal(err)
	}
	said := map[uint64]string{}
	for i := range journal {
		said[journal[i].ID] = journal[i].Sentence
	}
	clips, err := ClipsIn(state)
	if err != nil || len(clips) == 0 {
		t.Fatal(clips, err)
	}
	same, transitions := 0, 0
	for _, c := range clips {
		dir := t.TempDir()
		if err := PullFrom(state, wire.PullQuery{Clip: c.ID}, dir); err != nil {
			t.Fatal(err)
		}
		wavs, _ := filepath.Glob(filepath.Join(dir, "*.wav"))
		if len(wavs) != 1 {
			t.Fatal(wavs)
		}
		base := strings.TrimSuffix(wavs[0], ".wav")
		var out, summary bytes.Buffer
		o := ReviewOptions{SkidFile: base + ".skid.yaml", Recording: wavs[0], ProcessCSV: base + ".process.csv", Out: &out, Summary: &summary}
		if err := Review(ctx, o); err != nil {
			t.Fatalf("%v\n%s", err, summary.String())
		}
		if !strings.Contains(summary.String(), "bit for bit") {
			t.Errorf("the summary does not say that the review went on from a state:\n%s", summary.String())
		}
		first, last := int64(0), int64(0)
		for i, line := range strings.Split(strings.TrimSpace(out.String()), "\n") {
			var head struct {
				Type string `json:"type"`
				Turn int64  `json:"turn"`
				ID   uint64 `json:"id"`
				Said string `json:"sentence"`
			}
			if err := json.Unmarshal([]byte(line), &head); err != nil {
				t.Fatal(err)
			}
			if head.Type == "turn" {
				if i == 0 {
					first = head.Turn
				}
				last = max(last, head.Turn)
			}
		}
		for _, line := range strings.Split(strings.TrimSpace(out.String()), "\n") {
			var head struct {
				Type string `json:"type"`
				Turn int64  `json:"turn"`
				ID   uint64 `json:"id"`
				Said string `json:"sentence"`
			}
			_ = json.Unmarshal([]byte(line), &head) // it could be read above
			switch {
			case head.Type == "transition":
				if head.Said != said[head.ID] {
					t.Errorf("clip %s, transition %d says %q, live %q", c.ID, head.ID, head.Said, said[head.ID])
				}
				transitions++
			case head.Type != "turn" || head.Turn > last-3: // at the end of a clip the next turn's marks are missing
			case line != live[head.Turn]:
				t.Fatalf("clip %s (turns %d to %d), turn %d: %s", c.ID, first, last, head.Turn, parting(line, live[head.Turn]))
			default:
				same++
			}
		}
	}
	t.Logf("%d clips: %d turns and %d transitions the same", len(clips), same, transitions)
	if same < 30 || transitions == 0 {
		t.Errorf("%d turns and %d transitions compared: too few", same, transitions)
	}
}

// A state that does not belong to a recording is refused with what to do, never used.
func TestStateRefused(t *testing.T) {
	r := recorded(t)
	path := filepath.Join(t.TempDir(), "x.state")
	src, err := wav.Open(r.wav, wav.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	line, err := NewLine(r.sk, src.Info(), fixed(r.sk), LearnPlan{}, nil, alarm.New(AlarmTiming(r.sk)))
	if err != nil {
		t.Fatal(err)
	}
	var k states
	good, err := takeState(&k, 0, r.sk, line, newHeld())
	if err != nil {
		t.Fatal(err)
	}
	review := func(state []byte) error {
		if err := os.WriteFile(path, state, 0o644); err != nil {
			t.Fatal(err)
		}
		return Review(t.Context(), ReviewOptions{SkidFile: r.skid, Recording: r.wav, ProcessCSV: r.csv, State: path})
	}
	if err := review(good.data); err != nil {
		t.Errorf("a good one: %v", err)
	}
	head, body, _ := bytes.Cut(good.data, []byte("\n"))
	for name, bad := range map[string][]byte{
		"no state of the line": []byte("hello"),
		"another skid file":    append(bytes.Replace(head, []byte(r.sk.Hash), []byte(strings.Repeat("0", 64)), 1), append([]byte("\n"), body...)...),
		"taken at sample 9":    append(bytes.Replace(head, []byte(`"at_sample":0`), []byte(`"at_sample":9`), 1), append([]byte("\n"), body...)...),
		"damaged":              good.data[:len(good.data)/2],
	} {
		if err := review(bad); err == nil || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// parting shows where two texts part.
func parting(a, b string) string {
	i := 0
	for i < len(a) && i < len(b) && a[i] == b[i] {
		i++
	}
	cut := func(s string) string { return s[max(0, min(i, len(s))-120):min(len(s), i+60)] }
	return cut(a) + " … live: " + cut(b)
}

// However far back an alarm reaches, a handful of states is kept, and one of them is old enough.
func TestStatesKept(t *testing.T) {
	s := staffed(t)
	for _, reach := range []time.Duration{0, 30 * time.Second, time.Hour} {
		k, most := states{}, 0
		total := 2*reach + 3*time.Minute
		for at := time.Duration(0); at < total; at += 5 * time.Second {
			end := int64(at.Seconds() * s.info.Rate)
			if err := k.note(end, s.info.Rate, reach, s.sk, s.line, newHeld()); err != nil {
				t.Fatal(err)
			}
			most = max(most, len(k.kept))
			ask := max(0, end-int64(reach.Seconds()*s.info.Rate))
			st, ok := k.before(ask)
			if early := time.Duration(float64(ask-st.seq) / s.info.Rate * 1e9); !ok || early > max(stateEvery, reach/mostStates) {
				t.Fatalf("reach %v, at %v: the state is %v older than asked for (there: %v)", reach, at, early, ok)
			}
		}
		if most > mostStates+3 {
			t.Errorf("reach %v: %d states in memory", reach, most)
		}
	}
}
