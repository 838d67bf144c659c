package tape

import (
	"bytes"
	"errors"
	"path/filepath"
	"strings"
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
		opt.Segment = 50 * time.Millisecond
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
		for range rapid.IntRange(1, 25).Draw(rt, "steps") {
			switch rapid.IntRange(0, 9).Draw(rt, "do") {
			default:
				lost := int64(0)
				if rapid.IntRange(0, 3).Draw(rt, "gap") == 0 {
					lost = rapid.Int64Range(1, 1000).Draw(rt, "lost")
				}
				b := block(next+lost, rapid.IntRange(0, 130).Draw(rt, "n"), 3)
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

func TestRollKeepsTheFileWithinItsBound(t *testing.T) {
	opt := small()
	opt.Info.Channels, opt.Info.Rate = 8, 10000
	opt.Segment = 100 * time.Millisecond // 1000 samples x 8 x 3 bytes that do not compress
	opt.MaxBytes = 4 << 20
	tp := open(t, t.TempDir(), opt)
	const segments = 900 // five times round
	for k := int64(0); k < segments; k++ {
		tp.Append(block(k*1000, 1000, 8))
		if k%100 == 99 {
			flush(t, tp)
			if s := tp.Stats(); s.FileBytes > opt.MaxBytes {
				t.Fatalf("after %d segments the file has %d bytes, bound %d", k+1, s.FileBytes, opt.MaxBytes)
			}
		}
	}
	s := tp.Stats()
	if s.LastError != nil || s.LostSegments != 0 || s.QueueDroppedBlocks != 0 {
		t.Errorf("%+v", s)
	}
	if s.LiveBytes < opt.MaxBytes*8/10 {
		t.Errorf("only %d bytes live of %d", s.LiveBytes, opt.MaxBytes)
	}
	if s.NewestSeq != segments*1000 || s.OldestSeq == 0 {
		t.Errorf("oldest %d newest %d", s.OldestSeq, s.NewestSeq)
	}
	wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(s.OldestSeq, s.NewestSeq, f) }, s.OldestSeq, s.NewestSeq)
	perByte := float64(s.WrittenBytes) / float64(s.KeptBytes)
	t.Logf("%d segments of %d kB: file %d of %d bytes, live %d (%.0f %%); %.3f bytes written per byte kept; worst commit %v",
		segments, 24, s.FileBytes, opt.MaxBytes, s.LiveBytes, 100*float64(s.LiveBytes)/float64(opt.MaxBytes), perByte, s.WorstCommit)
	if perByte > 2 { // small segments: the index pages weigh; see TestBytesWritten for real ones
		t.Errorf("%.2f bytes written per byte kept", perByte)
	}
}

// Segments as a skid's: the figure that counts for the wear of a disk.
func TestBytesWritten(t *testing.T) {
	opt := small()
	opt.Info.Channels, opt.Info.Rate, opt.Segment = 17, 51200, time.Second
	opt.MaxBytes, opt.ClipBytes = 40<<20, 40<<20
	tp := open(t, t.TempDir(), opt)
	signals := skidSignals(51200)
	b := &acq.Block{N: 51200}
	for c := range 17 {
		b.Counts = append(b.Counts, signals[[]string{"pressure", "vibration", "vibration", "mark"}[c%4]])
	}
	const seconds = 40
	for k := range int64(seconds) {
		b.Seq0 = k * 51200
		tp.Append(b)
		flush(t, tp)
	}
	s := tp.Stats()
	t.Logf("17 inputs at 51.2 kHz, %d s: %.2f MB/s kept of %.2f MB/s sampled (24 bit); %.4f bytes written per byte kept; file %d of %d; worst commit %v",
		seconds, float64(s.KeptBytes)/seconds/1e6, 17*51200*3/1e6, float64(s.WrittenBytes)/float64(s.KeptBytes), s.FileBytes, opt.MaxBytes, s.WorstCommit)
	if s.FileBytes > opt.MaxBytes || s.OldestSeq == 0 {
		t.Errorf("file %d of %d, oldest %d", s.FileBytes, opt.MaxBytes, s.OldestSeq)
	}
	if float64(s.WrittenBytes) > 1.1*float64(s.KeptBytes) {
		t.Errorf("%d written, %d kept", s.WrittenBytes, s.KeptBytes)
	}
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
	dir := t.TempDir()
	tp := open(t, dir, opt)
	tp.clipMu.Lock() // holds the writer at its next look at the clips
	feed(tp, 0, 200)
	for tp.next.Load() < 200 { // segment 0 is on disk; the writer waits at the lock or soon will
		time.Sleep(time.Millisecond)
	}
	feed(tp, 200, 5200)
	tp.clipMu.Unlock()
	flush(t, tp)
	s := tp.Stats()
	if s.QueueDroppedSamples == 0 {
		t.Skip("the writer kept up: nothing to see")
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
	if _, err := Open(filepath.Join(dir, "tape.db"), opt); !errors.Is(err, boltfile.ErrHeld) {
		t.Errorf("second open: %v", err)
	}
	feed(tp, 0, 100)
}
