package station

import (
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	script "lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/tape"
)

// journalled is a state folder whose journal ends at the time given, and a skid file beside it.
func journalled(t *testing.T, at time.Time) Options {
	t.Helper()
	dir := t.TempDir()
	l, err := ledger.Open(filepath.Join(dir, "state.db"), ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	err = l.Commit(func(tx *ledger.Tx) error {
		return tx.Journal(alarm.Transition{ID: 7, Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", From: alarm.Normal, To: alarm.Unacked, Severity: alarm.Alert, At: at})
	})
	if err != nil {
		t.Fatal(err)
	}
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(dir, "skid.yaml")
	if err := os.WriteFile(file, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	return Options{SkidFile: file, State: dir, Source: "model:standing", Listen: "none", Fast: true}
}

// TestModelGoesOnAfterTheJournal: a model played fast runs ahead of the wall clock; started again it must not write
// journal entries that are older than those there.
func TestModelGoesOnAfterTheJournal(t *testing.T) {
	newest := time.Now().Add(time.Hour)
	s, err := Open(journalled(t, newest))
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if !s.info.Start.After(newest) || s.info.Start.Sub(newest) > 2*time.Second {
		t.Errorf("the journal ends at %s, the model begins at %s", newest, s.info.Start)
	}
	if tr := s.health(time.Time{}).Trouble; len(tr) != 0 {
		t.Errorf("trouble %q", tr)
	}
}

// TestClockSetBackIsTold: a source whose clock is behind the journal runs, keeps its own times and says so.
func TestClockSetBackIsTold(t *testing.T) {
	newest := time.Date(2030, 5, 1, 12, 0, 0, 0, time.UTC)
	o := journalled(t, newest)
	o.Start = newest.Add(-30 * time.Minute)
	s, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if !s.info.Start.Equal(o.Start) {
		t.Errorf("the source begins at %s, want %s", s.info.Start, o.Start)
	}
	if tr := s.health(time.Time{}).Trouble; len(tr) != 1 || !strings.Contains(tr[0], "2030-05-01T11:30:00Z") || !strings.Contains(tr[0], "by id") {
		t.Errorf("trouble %q", tr)
	}
}

// TestClipsOfEarlierRunsKeepTheirTimes: after a restart sample numbers begin anew, and a clip of before must not be
// dated by the new run's clock.
func TestClipsOfEarlierRunsKeepTheirTimes(t *testing.T) {
	o := journalled(t, time.Date(2030, 5, 1, 0, 0, 0, 0, time.UTC))
	o.Start = time.Date(2030, 5, 1, 12, 0, 0, 0, time.UTC)
	raw, err := os.ReadFile(o.SkidFile)
	if err != nil {
		t.Fatal(err)
	}
	first := played(t, o, 4*time.Second)
	path := filepath.Join(o.State, "tape.db")
	tp, err := tape.Open(path, tape.Options{Info: first.Info(), Skid: raw})
	if err != nil {
		t.Fatal(err)
	}
	fill(t, tp, first)
	rate := first.Info().Rate
	if _, err := tp.Protect(tape.Clip{ID: "c", Reason: "test", From: int64(1.5 * rate), To: int64(3.25 * rate)}); err != nil {
		t.Fatal(err)
	}
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}

	o.Start = o.Start.Add(24 * time.Hour)
	second := played(t, o, time.Second)
	if tp, err = tape.Open(path, tape.Options{Info: second.Info(), Skid: raw}); err != nil {
		t.Fatal(err)
	}
	fill(t, tp, second)
	want := [2]time.Time{first.Info().Start.Add(1500 * time.Millisecond), first.Info().Start.Add(3250 * time.Millisecond)}
	check := func(who string, from, to time.Time, bytes int64) {
		t.Helper()
		for i, got := range []time.Time{from, to} {
			if d := got.Sub(want[i]).Abs(); d > time.Millisecond {
				t.Errorf("%s: clip bounds %s to %s, want %s to %s", who, from, to, want[0], want[1])
			}
		}
		if bytes <= 0 {
			t.Errorf("%s: %d bytes", who, bytes)
		}
	}
	c := wireClips(tp, second.Info().Rate, second.Info().Start)
	if len(c) != 1 {
		t.Fatalf("clips %+v", c)
	}
	check("running", c[0].From, c[0].To, c[0].Bytes)
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	down, err := ClipsIn(o.State)
	if err != nil || len(down) != 1 {
		t.Fatalf("clips %+v, %v", down, err)
	}
	check("down", down[0].From, down[0].To, down[0].Bytes)
}

// played is a source that plays the options' scenario for so long, as Open would make it.
func played(t *testing.T, o Options, long time.Duration) acq.Source {
	t.Helper()
	sk, err := skid.Load(o.SkidFile)
	if err != nil {
		t.Fatal(err)
	}
	src, err := acqmodel.Open(sk, script.Script{}, acqmodel.Options{Seed: 1, Duration: long, Start: o.Start})
	if err != nil {
		t.Fatal(err)
	}
	return src
}

// fill reads a source to its end into a tape.
func fill(t *testing.T, tp *tape.Tape, src acq.Source) {
	t.Helper()
	var b acq.Block
	for {
		err := src.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		tp.Append(&b)
	}
	if err := tp.Flush(t.Context()); err != nil {
		t.Fatal(err)
	}
}
