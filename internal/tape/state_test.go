package tape

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"testing"
)

// A state stays as long as a clip begins where it was taken, over merging, restart and release, and goes with the export.
func TestAClipCarriesAState(t *testing.T) {
	opt := small()
	dir := t.TempDir()
	tp := open(t, dir, opt)
	feed(tp, 0, 4000)
	flush(t, tp)
	first, second := bytes.Repeat([]byte("first"), 30_000), []byte("second")
	protect(t, tp, Clip{ID: "a", From: 1000, To: 2000, State: first})
	protect(t, tp, Clip{ID: "b", From: 1500, To: 2500, State: second}) // becomes part of a
	protect(t, tp, Clip{ID: "far", From: 3000, To: 3500})
	flush(t, tp)
	wantState := func(tp *Tape, id string, want []byte) {
		t.Helper()
		got, err := tp.State(id)
		if want == nil {
			if !errors.Is(err, ErrNoState) {
				t.Errorf("%s: %v", id, err)
			}
			return
		}
		if err != nil || !bytes.Equal(got, want) {
			t.Errorf("%s: %d bytes, %v", id, len(got), err)
		}
	}
	wantState(tp, "a", first)
	wantState(tp, "b", first)
	wantState(tp, "far", nil)
	live := tp.Stats().ClipLiveBytes
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	tp = open(t, dir, opt)
	wantState(tp, "a", first)
	if again := tp.Stats().ClipLiveBytes; again != live || live < int64(len(first)) {
		t.Errorf("%d bytes live after a restart, %d before", again, live)
	}
	dst := filepath.Join(t.TempDir(), "event")
	if _, err := tp.ExportClip(dst, "a"); err != nil {
		t.Fatal(err)
	}
	if got, err := os.ReadFile(dst + ".state"); err != nil || !bytes.Equal(got, first) {
		t.Errorf("%d bytes exported, %v", len(got), err)
	}
	// An earlier beginning with a state of its own takes the place of the later one.
	protect(t, tp, Clip{ID: "early", From: 800, To: 1100, State: second})
	wantState(tp, "a", second)
	if now := tp.Stats().ClipLiveBytes; now > live-100_000 {
		t.Errorf("%d bytes live, the old state's are still among them (%d before)", now, live)
	}
	if err := tp.Release("a"); err != nil {
		t.Fatal(err)
	}
	if err := tp.Release("far"); err != nil {
		t.Fatal(err)
	}
	if s := tp.Stats(); s.ClipLiveBytes != 0 {
		t.Errorf("%d bytes live without a clip", s.ClipLiveBytes)
	}
}

// States that would fill the clips' file are left out; the clip itself is not.
func TestAStateThatDoesNotFit(t *testing.T) {
	opt := small()
	opt.ClipBytes = 1<<20 + 20<<10
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 4000)
	protect(t, tp, Clip{ID: "a", From: 1000, To: 2000, State: make([]byte, 2<<20)})
	flush(t, tp)
	if _, err := tp.State("a"); !errors.Is(err, ErrNoState) {
		t.Errorf("%v", err)
	}
	wantSamples(t, clipReader(tp, "a"), 1000, 2000)
}
