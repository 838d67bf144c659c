package tape

import (
	"errors"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"lapwing/internal/acq"
)

func protect(t *testing.T, tp *Tape, c Clip) Clip {
	t.Helper()
	got, err := tp.Protect(c)
	if err != nil {
		t.Fatal(err)
	}
	return got
}

func clip(t *testing.T, tp *Tape, id string) Clip {
	t.Helper()
	c, err := tp.Clip(id)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func clipReader(tp *Tape, id string) func(func(*acq.Block) error) error {
	return func(f func(*acq.Block) error) error { return tp.ReadClip(id, f) }
}

func TestAClipWaitsForItsTailAndSurvivesTheRoll(t *testing.T) {
	opt := small()
	opt.MaxAge = 2 * time.Second
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 1000)
	flush(t, tp)
	protect(t, tp, Clip{ID: "a", Reason: "alarm", AlarmID: 7, From: 450, To: 1730})
	flush(t, tp)
	if c := clip(t, tp, "a"); c.Complete {
		t.Errorf("complete before its tail has come: %+v", c)
	}
	feed(tp, 1000, 9000)
	flush(t, tp)
	if s := tp.Stats(); s.OldestSeq < 6000 {
		t.Fatalf("the ring has not rolled: oldest %d", s.OldestSeq)
	}
	c := clip(t, tp, "a")
	if !c.Complete || c.Have != 1280 || c.Short != "" || !slices.Equal(c.Alarms, []uint64{7}) {
		t.Errorf("%+v", c)
	}
	wantSamples(t, clipReader(tp, "a"), 450, 1730)
}

func TestAPendingClipSurvivesARestart(t *testing.T) {
	for name, c := range map[string]struct {
		start time.Duration // the source's clock origin moves by this at the restart
		have  int64
		short string
	}{
		"the source counts on":   {0, 3000, ""},
		"the source counts anew": {time.Hour, 1500, "ended at sample 2000"},
	} {
		t.Run(name, func(t *testing.T) {
			dir, opt := t.TempDir(), small()
			tp, err := Open(filepath.Join(dir, "tape.db"), opt)
			if err != nil {
				t.Fatal(err)
			}
			feed(tp, 0, 2000)
			protect(t, tp, Clip{ID: "a", Run: 1, From: 500, To: 3500})
			if err := tp.Close(); err != nil {
				t.Fatal(err)
			}
			opt.Info.Start = opt.Info.Start.Add(c.start)
			tp = open(t, dir, opt)
			if got := clip(t, tp, "a"); got.Complete {
				t.Errorf("complete at once: %+v", got)
			}
			feed(tp, 2000, 4000)
			flush(t, tp)
			got := clip(t, tp, "a")
			if !got.Complete || got.Have != c.have || !strings.Contains(got.Short, c.short) || (c.short == "") != (got.Short == "") {
				t.Errorf("%+v", got)
			}
			wantSamples(t, clipReader(tp, "a"), 500, 500+c.have)
		})
	}
}

func TestOverlappingClipsAreMerged(t *testing.T) {
	opt := small()
	opt.ClipSpan = 3 * time.Second
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 8000)
	flush(t, tp)
	protect(t, tp, Clip{ID: "a", Reason: "one", AlarmID: 1, From: 1000, To: 2000})
	protect(t, tp, Clip{ID: "far", From: 3000, To: 3500})
	flush(t, tp)
	if c := protect(t, tp, Clip{ID: "b", Reason: "two", AlarmID: 2, From: 1500, To: 2500}); c.ID != "a" || c.From != 1000 || c.To != 2500 {
		t.Errorf("%+v", c)
	}
	// c closes the gap between a and far.
	if c := protect(t, tp, Clip{ID: "c", Reason: "one", From: 2400, To: 3100}); c.ID != "a" || c.To != 3500 {
		t.Errorf("%+v", c)
	}
	// A chain of alarms must not make one clip without end.
	if c := protect(t, tp, Clip{ID: "d", From: 3400, To: 4500}); c.ID != "d" {
		t.Errorf("%+v", c)
	}
	flush(t, tp)
	protect(t, tp, Clip{ID: "b", From: 1500, To: 2500}) // asked again: nothing happens
	all := tp.Clips()
	if len(all) != 2 {
		t.Fatalf("%+v", all)
	}
	a := all[0]
	if a.Reason != "one; two" || !slices.Equal(a.Alarms, []uint64{1, 2}) || len(a.Merged) != 3 || !a.Complete || a.Have != 2500 {
		t.Errorf("%+v", a)
	}
	for _, id := range []string{"a", "b", "c", "far"} {
		wantSamples(t, clipReader(tp, id), 1000, 3500)
	}
	// Segments that both need stay when one goes.
	if err := tp.Release("b"); err != nil {
		t.Fatal(err)
	}
	wantSamples(t, clipReader(tp, "d"), 3400, 4500)
	if _, err := tp.Clip("a"); !errors.Is(err, ErrNoClip) {
		t.Errorf("%v", err)
	}
}

func TestTheOldestUnlabelledClipGivesWay(t *testing.T) {
	opt := small()
	opt.Info.Channels, opt.Info.Rate = 4, 10000
	opt.Segment = 100 * time.Millisecond
	opt.MaxBytes, opt.ClipBytes = 8<<20, 5<<18 // room for some 48 segments
	opt.ClipSpan = time.Millisecond            // no merging
	tp := open(t, t.TempDir(), opt)
	for k := range int64(150) {
		tp.Append(block(k*1000, 1000, 4))
	}
	flush(t, tp)
	for k, id := range []string{"kept", "old", "new", "newest"} {
		protect(t, tp, Clip{ID: id, From: int64(k) * 30000, To: int64(k)*30000 + 18000})
		flush(t, tp)
		if id == "kept" {
			if err := tp.Keep(id, "for the report"); err != nil {
				t.Fatal(err)
			}
		}
		if s := tp.Stats(); s.ClipFileBytes > opt.ClipBytes {
			t.Fatalf("clips take %d bytes of %d", s.ClipFileBytes, opt.ClipBytes)
		}
	}
	var ids []string
	for _, c := range tp.Clips() {
		ids = append(ids, c.ID)
		if c.Short != "" {
			t.Errorf("%s: %s", c.ID, c.Short)
		}
	}
	if s := tp.Stats(); !slices.Contains(ids, "kept") || slices.Contains(ids, "old") || !slices.Contains(ids, "newest") || s.ClipsReleased == 0 {
		t.Errorf("left are %v; %d released", ids, s.ClipsReleased)
	}
	wantSamples(t, clipReader(tp, "kept"), 0, 18000)
	for _, c := range tp.Clips() {
		if err := tp.Keep(c.ID, "keep"); err != nil {
			t.Fatal(err)
		}
	}
	protect(t, tp, Clip{ID: "late", From: 110000, To: 150000})
	flush(t, tp)
	if c := clip(t, tp, "late"); !c.Complete || !strings.Contains(c.Short, "no room") {
		t.Errorf("%+v", c)
	}
	if s := tp.Stats(); s.ClipFileBytes > opt.ClipBytes {
		t.Errorf("clips take %d bytes of %d", s.ClipFileBytes, opt.ClipBytes)
	}
}

func TestWhatAClipLacksIsSaid(t *testing.T) {
	opt := small()
	opt.MaxAge = time.Second
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 5000)
	b := block(5300, 200, 3)
	b.Lost = 300
	tp.Append(b)
	flush(t, tp)
	for id, c := range map[string]struct {
		from, to, have int64
		short          string
	}{
		"rolled": {100, 200, 0, "none of it"},
		"half":   {3500, 4800, 600, "tape began at"},
		"gap":    {4900, 5400, 200, "missing inside"},
	} {
		protect(t, tp, Clip{ID: id, From: c.from, To: c.to})
		flush(t, tp)
		got := clip(t, tp, id)
		if !got.Complete || !strings.Contains(got.Short, c.short) {
			t.Errorf("%s: %+v", id, got)
		}
		if err := tp.Release(id); err != nil {
			t.Error(err)
		}
	}
	if _, err := tp.Protect(Clip{From: 5, To: 5}); !errors.Is(err, ErrBadSpan) {
		t.Errorf("%v", err)
	}
	if c := protect(t, tp, Clip{From: 4500, To: 4600}); c.ID == "" {
		t.Error("no name was made")
	}
}

func TestAClipThatTheDiskRefusesIsShortAndTheTapeGoesOn(t *testing.T) {
	opt := small()
	refuse := false
	opt.disk = func(kind string) error {
		if refuse && kind == "clips" {
			return syscall.EIO
		}
		return nil
	}
	dir := t.TempDir()
	tp := open(t, dir, opt)
	feed(tp, 0, 1000)
	flush(t, tp)
	protect(t, tp, Clip{ID: "a", From: 300, To: 1500}) // copies 200 to 1000
	flush(t, tp)
	refuse = true // the writer is idle: nothing reads this meanwhile
	feed(tp, 1000, 3000)
	flush(t, tp)
	refuse = false
	c := clip(t, tp, "a")
	if !c.Complete || c.Have != 700 || !strings.Contains(c.Short, syscall.EIO.Error()) {
		t.Errorf("%+v", c)
	}
	if s := tp.Stats(); !errors.Is(s.LastError, syscall.EIO) || s.NewestSeq != 3000 {
		t.Errorf("%+v", s)
	}
}

// A clip that is to stay apart shares samples with others on the disk, and nothing else.
func TestAClipThatStaysApart(t *testing.T) {
	tp := open(t, t.TempDir(), small())
	feed(tp, 0, 3000)
	protect(t, tp, Clip{ID: "healthy", From: 0, To: 1000, Apart: true})
	protect(t, tp, Clip{ID: "event", From: 400, To: 2000})
	protect(t, tp, Clip{ID: "healthy too", From: 1500, To: 2500, Apart: true})
	flush(t, tp)
	bytes := tp.Stats().ClipLiveBytes
	for id, want := range map[string][2]int64{"healthy": {0, 1000}, "event": {400, 2000}, "healthy too": {1500, 2500}} {
		if c := clip(t, tp, id); c.ID != id || c.From != want[0] || c.To != want[1] || len(c.Merged) > 0 {
			t.Errorf("%+v", c)
		}
		wantSamples(t, clipReader(tp, id), want[0], want[1])
	}
	if err := tp.Release("event"); err != nil {
		t.Fatal(err)
	}
	wantSamples(t, clipReader(tp, "healthy"), 0, 1000)
	wantSamples(t, clipReader(tp, "healthy too"), 1500, 2500)
	if now := tp.Stats().ClipLiveBytes; now >= bytes || now < bytes*10/13-bytes/5 {
		t.Errorf("%d bytes of clips, %d before", now, bytes)
	}
}
