package tape

import (
	"bytes"
	"errors"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"go.uber.org/goleak"
	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

func TestMain(m *testing.M) {
	if runChild() {
		return
	}
	goleak.VerifyTestMain(m)
}

// The tape against a plain slice: random blocks, gaps, overloads, reads and re-openings.
func TestAgainstAPlainSlice(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		dir := t.TempDir()
		opt := small()
		opt.Segment = 30 * time.Millisecond
		reopen := func() *Tape {
			tp, err := Open(filepath.Join(dir, "tape.db"), opt)
			if err != nil {
				rt.Fatal(err)
			}
			return tp
		}
		tp := reopen()
		defer func() { _ = tp.Close() }()
		var model []sample
		var next int64
		for range rapid.IntRange(1, 10).Draw(rt, "steps") {
			switch rapid.IntRange(0, 9).Draw(rt, "do") {
			default:
				lost := int64(0)
				if rapid.IntRange(0, 3).Draw(rt, "gap") == 0 {
					lost = rapid.Int64Range(1, 1000).Draw(rt, "lost")
				}
				b := block(next+lost, rapid.IntRange(0, 70).Draw(rt, "n"), 3)
				b.Lost, b.Clip = lost, rapid.IntRange(0, 4).Draw(rt, "clip") == 0
				if b.N == 0 {
					b.Lost, b.Seq0 = 0, next
				}
				tp.Append(b)
				model = append(model, samplesOf(b)...)
				next = b.Seq0 + int64(b.N)
			case 7:
				flush(rt, tp)
			case 8:
				if err := tp.Close(); err != nil {
					rt.Fatal(err)
				}
				tp = reopen()
			case 9:
				flush(rt, tp)
				from := rapid.Int64Range(-10, next+10).Draw(rt, "from")
				to := rapid.Int64Range(from, next+20).Draw(rt, "to")
				var got, want []sample
				if err := tp.Read(from, to, collect(&got)); err != nil {
					rt.Fatal(err)
				}
				for _, s := range model {
					if s.seq >= from && s.seq < to {
						s.lost = min(s.lost, s.seq-from) // what was lost before the span is no part of it
						want = append(want, s)
					}
				}
				if d := diff(got, want); d != "" {
					rt.Fatalf("read %d to %d: %s", from, to, d)
				}
			}
		}
		flush(rt, tp)
		var got []sample
		if err := tp.Read(minSeq, maxSeq, collect(&got)); err != nil {
			rt.Fatal(err)
		}
		if d := diff(got, model); d != "" {
			rt.Fatal(d)
		}
		if err := tp.Check(); err != nil {
			rt.Fatal(err)
		}
	})
}

// Many laps with segments of unlike size.
func TestRollKeepsTheFileWithinItsBound(t *testing.T) {
	opt := small()
	opt.Info.Channels, opt.MaxBytes = 8, 8<<20
	tp := open(t, t.TempDir(), opt)
	w := idleWriter(t, tp)
	rnd := rand.New(rand.NewPCG(3, 4))
	noise := make([]int32, 3000)
	for i := range noise {
		noise[i] = int32(rnd.Uint32()) >> 8
	}
	rec := w.pack.pack(nil, noise, 0)
	const segments = 400
	for k := range int64(segments) {
		p := &packed{meta: []byte("not read here"), info: segInfo{key: uint64(k + 1), run: 1, n: 1, seq0: k, end: k + 1}}
		size := rnd.IntN(len(rec)/2) + len(rec)/2
		for range 8 {
			p.chans = append(p.chans, rec[:size])
		}
		if err := w.commit([]*packed{p}); err != nil {
			t.Fatal(err)
		}
		if s := tp.Stats(); s.FileBytes > opt.MaxBytes {
			t.Fatalf("after %d segments the file has %d bytes, bound %d", k+1, s.FileBytes, opt.MaxBytes)
		}
	}
	s := tp.Stats()
	if s.FileBytes < opt.MaxBytes*9/10 || s.LiveBytes < opt.MaxBytes*8/10 || s.NewestSeq != segments || s.OldestSeq == 0 {
		t.Errorf("file %d and live %d of %d bytes; oldest %d newest %d", s.FileBytes, s.LiveBytes, opt.MaxBytes, s.OldestSeq, s.NewestSeq)
	}
	t.Logf("%d segments of 36 to 72 kB, %d laps: file %d of %d bytes, live %d (%.0f %%); %.3f bytes written per byte kept; %d commits refused as full, worst commit %v",
		segments, s.KeptBytes/opt.MaxBytes, s.FileBytes, opt.MaxBytes, s.LiveBytes, 100*float64(s.LiveBytes)/float64(opt.MaxBytes),
		float64(s.WrittenBytes)/float64(s.KeptBytes), s.FailedCommits, s.WorstCommit)
	tp.ring.drop(tp.ring.oldest(1 << 20)) // what is in there is no recording: Check would say so
}

func TestAgeRollsToo(t *testing.T) {
	opt := small()
	opt.MaxAge = 3 * time.Second
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 10_000)
	flush(t, tp)
	s := tp.Stats()
	if got := s.NewestSeq - s.OldestSeq; got < 3000 || got > 3200 {
		t.Errorf("%d samples kept of 3 s at 1000/s in segments of 200", got)
	}
	if want := testStart.Add(10 * time.Second); !s.NewestUTC.Equal(want) {
		t.Errorf("newest %v, want %v", s.NewestUTC, want)
	}
}

func TestAFullQueueDropsTheOldestAndSaysSo(t *testing.T) {
	opt := small()
	opt.Queue = 500 * time.Millisecond
	var slow atomic.Bool
	reached, goOn := make(chan bool), make(chan bool)
	opt.disk = func(string) error {
		if slow.Swap(false) {
			reached <- true
			<-goOn
		}
		return nil
	}
	tp := open(t, t.TempDir(), opt)
	slow.Store(true)
	feed(tp, 0, 200) // one segment: its commit hangs
	<-reached
	feed(tp, 200, 5200)
	close(goOn)
	flush(t, tp)
	s := tp.Stats()
	if s.QueueDroppedSamples != 4500 || s.QueueDroppedBlocks != 90 {
		t.Errorf("%d samples in %d blocks dropped; 5000 came while 500 may wait", s.QueueDroppedSamples, s.QueueDroppedBlocks)
	}
	var got []sample
	var notes string
	err := tp.Read(0, 5200, func(b *acq.Block) error { notes += b.Note; return collect(&got)(b) })
	if err != nil {
		t.Fatal(err)
	}
	var lost int64
	for _, s := range got {
		lost += s.lost
	}
	if last := got[len(got)-1].seq; last != 5199 || lost != s.QueueDroppedSamples || int64(len(got))+lost != 5200 {
		t.Errorf("last %d, %d lost, %d dropped, %d read", last, lost, s.QueueDroppedSamples, len(got))
	}
	if !strings.Contains(notes, "queue was full") {
		t.Errorf("notes say %q", notes)
	}
}

// A writer that is behind puts up to four segments into one commit; what the disk refuses together is tried one by one.
func TestAWriterThatIsBehind(t *testing.T) {
	for name, c := range map[string]struct{ refused, commits int32 }{
		"catches up": {-1, 1 + 4}, "is refused once": {2, 1 + 1 + 4 + 3},
	} {
		t.Run(name, func(t *testing.T) {
			opt := small()
			opt.MaxBytes = 16 << 20
			reached, goOn := make(chan bool), make(chan bool)
			var commits atomic.Int32
			var watch atomic.Bool
			opt.disk = func(string) error {
				if !watch.Load() {
					return nil
				}
				switch commits.Add(1) {
				case 1:
					reached <- true
					<-goOn
				case c.refused:
					return syscall.EIO
				}
				return nil
			}
			tp := open(t, t.TempDir(), opt)
			watch.Store(true)
			feed(tp, 0, 200)
			<-reached
			feed(tp, 200, 17*200)
			close(goOn)
			flush(t, tp)
			watch.Store(false)
			if n := commits.Load(); n != c.commits {
				t.Errorf("%d commits, want %d", n, c.commits)
			}
			if s := tp.Stats(); s.LostSamples != 0 || s.OldestSeq != 0 {
				t.Errorf("%d lost, oldest %d", s.LostSamples, s.OldestSeq)
			}
			wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(0, 3400, f) }, 0, 3400)
		})
	}
}

func TestAFullDiskCostsSegmentsNotTheTape(t *testing.T) {
	opt := small()
	var full atomic.Bool
	opt.disk = func(string) error {
		if full.Load() {
			return syscall.ENOSPC
		}
		return nil
	}
	tp := open(t, t.TempDir(), opt)
	feed(tp, 0, 1000)
	flush(t, tp)
	full.Store(true)
	feed(tp, 1000, 2000)
	err := tp.Flush(t.Context())
	s := tp.Stats()
	if s.LostSamples != 1000 || !errors.Is(s.LastError, syscall.ENOSPC) {
		t.Errorf("flush %v; %d samples lost, last error %v", err, s.LostSamples, s.LastError)
	}
	full.Store(false)
	feed(tp, 2000, 3000)
	flush(t, tp)
	var got []sample
	if err := tp.Read(0, 3000, collect(&got)); err != nil {
		t.Fatal(err)
	}
	if len(got) != 2000 || got[1000].seq != 2000 || got[1000].lost != 1000 {
		t.Errorf("%d samples, then %d (%d lost)", len(got), got[1000].seq, got[1000].lost)
	}
}

func TestRuns(t *testing.T) {
	opt := small()
	dir := t.TempDir()
	step := func(from, to int64) {
		tp, err := Open(filepath.Join(dir, "tape.db"), opt)
		if err != nil {
			t.Fatal(err)
		}
		feed(tp, from, to)
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
	}
	step(0, 1000)
	step(1500, 2000) // same clock origin, later: the same run with a gap
	step(100, 700)   // counts anew
	opt.Info.Start = opt.Info.Start.Add(time.Hour)
	step(5000, 5300) // another clock origin
	tp := open(t, dir, opt)
	feed(tp, 5300, 5400)
	feed(tp, 0, 200) // a source that restarts under our eyes
	flush(t, tp)
	want := []Span{{1, 0, 2000}, {2, 100, 700}, {3, 5000, 5400}, {4, 0, 200}}
	got := tp.Extents()
	if len(got) != len(want) {
		t.Fatalf("%+v", got)
	}
	for i := range want {
		if got[i].Span != want[i] {
			t.Errorf("run %d: %+v, want %+v", i, got[i].Span, want[i])
		}
	}
	var lost int64
	if err := tp.ReadSpan(want[0], func(b *acq.Block) error { lost += b.Lost; return nil }); err != nil || lost != 500 {
		t.Errorf("lost %d, %v", lost, err)
	}
	run, seq, ok := tp.SeqAt(testStart.Add(1700 * time.Millisecond))
	if !ok || run != 1 || seq != 1700 {
		t.Errorf("SeqAt: run %d seq %d %v", run, seq, ok)
	}
}

func TestSkidFilesAreKeptWhileNeeded(t *testing.T) {
	opt := small()
	dir := t.TempDir()
	first := opt.Skid
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	feed(tp, 0, 1000)
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	opt.Skid = []byte("machine: other\n")
	tp = open(t, dir, opt)
	feed(tp, 1000, 2000)
	flush(t, tp)
	for _, want := range [][]byte{first, opt.Skid} {
		if got, err := tp.SkidFile(SkidHash(want)); err != nil || !bytes.Equal(got, want) {
			t.Errorf("%q, %v; want %q", got, err, want)
		}
	}
}

func TestWrongShapesAreRefusedAndCounted(t *testing.T) {
	tp := open(t, t.TempDir(), small())
	tp.Append(block(0, 10, 2))
	bad := block(0, 10, 3)
	bad.Counts[1] = bad.Counts[1][:9]
	tp.Append(bad)
	if s := tp.Stats(); s.Refused != 2 {
		t.Errorf("%d refused", s.Refused)
	}
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	tp.Append(block(0, 10, 3))
	if s := tp.Stats(); s.Refused != 3 {
		t.Errorf("%d refused after close", s.Refused)
	}
	if _, err := tp.Protect(Clip{From: 0, To: 1}); !errors.Is(err, ErrClosed) {
		t.Errorf("protect after close: %v", err)
	}
}

func TestOptionsAreRefusedTogether(t *testing.T) {
	_, err := Open(filepath.Join(t.TempDir(), "tape.db"), Options{Info: acq.Info{Rate: -1, Bits: 40}, MaxAge: -1})
	for _, want := range []string{"rate", "inputs", "40 bits", "negative"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v does not speak of %s", err, want)
		}
	}
	opt := small()
	opt.MaxBytes = 100
	if _, err := Open(filepath.Join(t.TempDir(), "tape.db"), opt); err == nil || !strings.Contains(err.Error(), "at least") {
		t.Errorf("%v", err)
	}
}

func TestOneProcessHoldsATape(t *testing.T) {
	dir := t.TempDir()
	tp := open(t, dir, small())
	opt := small()
	opt.LockWait = time.Millisecond
	if _, err := Open(filepath.Join(dir, "tape.db"), opt); !errors.Is(err, boltfile.ErrHeld) {
		t.Errorf("second open: %v", err)
	}
	feed(tp, 0, 100)
}
