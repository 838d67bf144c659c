package tape

import (
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

// A tape of eight hours with one segment a minute, against the rule written out.
func TestThinning(t *testing.T) {
	opt := small()
	opt.Info.Rate, opt.Segment, opt.Queue = 1, time.Minute, 24*time.Hour // 60 samples a segment
	opt.Thin = Thinning{Whole: time.Hour, OneIn: 5, Hourly: 3 * time.Hour}
	tp := open(t, t.TempDir(), opt)
	const minutes = 480
	feed(tp, 0, minutes*60)
	flush(t, tp)
	kept := map[int64]bool{} // by minute
	for _, g := range tp.ring.snapshot(func(*segInfo) bool { return true }) {
		kept[g.seq0/60] = true
	}
	newest := int64(minutes - 1)
	for m := range int64(minutes) {
		age := newest - m
		segment := m + 1 // numbers begin at 1
		want := age <= 60 || age <= 180 && segment%5 == 0 || m%60 == 0
		if kept[m] != want {
			t.Errorf("minute %d, %d old: kept %v, want %v", m, age, kept[m], want)
		}
	}
	// What was thinned out is a gap, told and never filled.
	var lost, have int64
	if err := tp.Read(0, minutes*60, func(b *acq.Block) error {
		lost, have = lost+b.Lost, have+int64(b.N)
		if b.Lost > 0 && !strings.Contains(b.Note, "not kept") {
			t.Errorf("a gap of %d samples says %q", b.Lost, b.Note)
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	if lost+have != minutes*60 || have != int64(len(kept))*60 {
		t.Errorf("%d lost and %d there of %d", lost, have, minutes*60)
	}
}

// A clip over a stretch that is being thinned out keeps all of it.
func TestAClipIsNotThinned(t *testing.T) {
	opt := small()
	opt.Thin = Thinning{Whole: 2 * time.Second, OneIn: 10}
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 1000)
	if _, err := tp.Protect(Clip{ID: "c", From: 0, To: 1000}); err != nil {
		t.Fatal(err)
	}
	feed(tp, 1000, 20_000)
	flush(t, tp)
	wantSamples(t, clipReader(tp, "c"), 0, 1000)
	if s := tp.Stats(); s.Segments > 10+9+2 {
		t.Errorf("%d segments of 200 ms kept: 2 s whole and one in ten of 18 s are 19", s.Segments)
	}
}

func TestThinningIsRefused(t *testing.T) {
	for _, c := range []struct {
		thin Thinning
		want string
	}{
		{Thinning{OneIn: 5}, "for which everything is kept"},
		{Thinning{Whole: time.Hour}, "one segment in 0"},
		{Thinning{Whole: time.Hour, OneIn: 2, Hourly: time.Minute}, "within"},
	} {
		opt := small()
		opt.Thin = c.thin
		if _, err := Open(filepath.Join(t.TempDir(), "tape.db"), opt); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v", c.thin, err)
		}
	}
}

// The whole bound is on the disk from the start, and the ring rolls within it.
func TestReserve(t *testing.T) {
	opt := small()
	opt.Reserve = true
	dir := t.TempDir()
	tp := open(t, dir, opt)
	path := filepath.Join(dir, "tape.db")
	got := boltfile.Allocated(path)
	if got < opt.MaxBytes {
		t.Skipf("this file system reserves nothing (%d bytes of %d)", got, opt.MaxBytes)
	}
	feed(tp, 0, 10_000)
	flush(t, tp)
	if now := boltfile.Allocated(path); now > opt.MaxBytes*21/20 {
		t.Errorf("%d bytes on the disk, bound %d", now, opt.MaxBytes)
	}
	wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(0, 10_000, f) }, 0, 10_000)
}
