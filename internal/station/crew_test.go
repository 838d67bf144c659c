package station

import (
	"encoding/json"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/plant"
	"lapwing/internal/wire"
)

// Every piece is done once, whatever their number, and all of them have come back when do returns.
func TestCrew(t *testing.T) {
	for size := range 5 {
		c := crewOf(size)
		if (c == nil) != (size < 2) {
			t.Fatalf("a crew of %d: %v", size, c)
		}
		l := Line{crew: c}
		done := make([]int, 40) // no piece touches another's: the race detector would see it
		for n := range len(done) {
			clear(done)
			for range 20 {
				l.each(n, func(i int) { done[i]++ })
			}
			for i, k := range done {
				if want := 20 * min(1, max(0, n-i)); k != want {
					t.Fatalf("a crew of %d, %d pieces: piece %d done %d times, want %d", size, n, i, k, want)
				}
			}
		}
		c.close()
	}
}

// cores runs the line with several goroutines to a turn, and with fewer whole records: what else it says is the same,
// to the last bit.
func (r take) cores(t *testing.T, want []string, learnTo int64) {
	for name, set := range map[string]func(*Line){
		"one core":       func(l *Line) {},
		"three cores":    func(l *Line) { l.crew = crewOf(3) },
		"newest records": func(l *Line) { l.records = Newest },
		"no records":     func(l *Line) { l.records = Heads },
	} {
		got, whole, valid := r.said(t, learnTo, set)
		wants := want
		switch name {
		case "newest records":
			if whole < takeLong || whole > valid/4 {
				t.Errorf("%s: %d whole records of %d turns", name, whole, valid)
			}
		case "no records":
			if whole > 0 {
				t.Errorf("%s: %d whole records", name, whole)
			}
		}
		if strings.HasSuffix(name, "records") {
			got, wants = headed(t, got), headed(t, want)
		}
		if d := differ(got, wants); d != "" {
			t.Error(name + " against the review: " + d)
		}
	}
}

// said is what the line says of the recording, one record each, with its whole and its valid turns counted.
func (r take) said(t *testing.T, learnTo int64, set func(*Line)) (got []string, whole, valid int) {
	t.Helper()
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
	set(line)
	defer line.crew.close()
	put := func(v any) {
		b, err := json.Marshal(v)
		if err != nil {
			t.Fatal(err)
		}
		got = append(got, string(b))
	}
	emit := func(o *Output) {
		if o.Record.Valid {
			valid++
			whole += min(1, len(o.Record.Throws))
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
	var clock rowClock
	for i := range blocks {
		for _, row := range clock.rows(&blocks[i], info.Rate, processAt(series.At).from(0)) {
			h.put(row)
		}
		if err := line.Add(&blocks[i], emit); err != nil {
			t.Fatal(err)
		}
	}
	line.Flush(emit)
	return got, whole, valid
}

// headed leaves the throws out of turn records.
func headed(t *testing.T, lines []string) []string {
	out := slices.Clone(lines)
	for i, l := range out {
		if !strings.HasPrefix(l, `{"type":"turn"`) {
			continue
		}
		var rec wire.Turn
		err := json.Unmarshal([]byte(l), &rec)
		rec.Throws = nil
		b, err2 := json.Marshal(rec)
		if err != nil || err2 != nil {
			t.Fatal(err, err2)
		}
		out[i] = string(b)
	}
	return out
}
