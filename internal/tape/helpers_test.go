package tape

import (
	"context"
	"encoding/binary"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
)

func ratio(a, b int) string { return fmt.Sprintf("%.3f", float64(a)/float64(b)) }

func fixChecksum(rec []byte) { binary.BigEndian.PutUint32(rec[4:], recordSum(rec)) }

var testStart = time.Date(2026, 3, 1, 6, 0, 0, 0, time.UTC)

// small is a tape of three inputs at 1000 samples/s, 24 bit, in segments of 200 samples.
func small() Options {
	return Options{
		Info:     acq.Info{Rate: 1000, Channels: 3, Bits: 24, Start: testStart, Name: "bench"},
		MaxBytes: 8 << 20, ClipBytes: 8 << 20, Segment: 200 * time.Millisecond, Queue: time.Hour,
		Skid: []byte("machine: test\n"), noSync: true,
	}
}

// open opens the tape in dir; when the test ends both files are checked page by page and checksum by checksum.
func open(t testing.TB, dir string, opt Options) *Tape {
	t.Helper()
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if tp.Close() != nil {
			return
		}
		again, err := Open(filepath.Join(dir, "tape.db"), opt)
		if err != nil {
			t.Error(err)
			return
		}
		if err := again.Check(); err != nil {
			t.Error(err)
		}
		if err := again.Close(); err != nil {
			t.Error(err)
		}
	})
	return tp
}

type fataler interface {
	Helper()
	Fatal(...any)
}

func flush(t fataler, tp *Tape) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	if err := tp.Flush(ctx); err != nil {
		t.Fatal(err)
	}
}

// count is the code of channel c at sample seq: reproducible, and unlike its neighbours.
func count(c int, seq int64) int32 {
	h := uint64(seq)*0x9E3779B97F4A7C15 + uint64(c)*0xBF58476D1CE4E5B9
	h ^= h >> 29
	return int32(h>>40) - 1<<23
}

func block(seq0 int64, n, channels int) *acq.Block {
	b := &acq.Block{Seq0: seq0, N: n, Counts: make([][]int32, channels)}
	for c := range b.Counts {
		for i := range n {
			b.Counts[c] = append(b.Counts[c], count(c, seq0+int64(i)))
		}
	}
	return b
}

// feed appends samples [from, to) in blocks of 50.
func feed(tp *Tape, from, to int64) {
	for seq := from; seq < to; seq += 50 {
		tp.Append(block(seq, int(min(50, to-seq)), tp.opt.Info.Channels))
	}
}

// sample is one sample of all channels with what was said of it.
type sample struct {
	seq    int64
	counts []int32
	lost   int64
	clip   bool
}

func samplesOf(b *acq.Block) []sample {
	out := make([]sample, b.N)
	for i := range out {
		out[i] = sample{seq: b.Seq0 + int64(i), clip: b.Clip}
		for _, x := range b.Counts {
			out[i].counts = append(out[i].counts, x[i])
		}
	}
	if b.N > 0 {
		out[0].lost = b.Lost
	}
	return out
}

func sameSample(a, b sample) bool {
	return a.seq == b.seq && a.lost == b.lost && a.clip == b.clip && slices.Equal(a.counts, b.counts)
}

// diff says where two recordings part, or nothing.
func diff(got, want []sample) string {
	for i := range min(len(got), len(want)) {
		if !sameSample(got[i], want[i]) {
			return fmt.Sprintf("sample %d: got %+v, want %+v", i, got[i], want[i])
		}
	}
	if len(got) != len(want) {
		return fmt.Sprintf("%d samples, want %d", len(got), len(want))
	}
	return ""
}

func collect(into *[]sample) func(*acq.Block) error {
	return func(b *acq.Block) error {
		*into = append(*into, samplesOf(b)...)
		return nil
	}
}

// wantSamples checks that span s of the ring holds exactly the codes of count, without a gap.
func wantSamples(t testing.TB, read func(func(*acq.Block) error) error, from, to int64) {
	t.Helper()
	next := from
	err := read(func(b *acq.Block) error {
		if b.Seq0 != next || b.Lost != 0 {
			t.Errorf("block at %d (lost %d), want %d", b.Seq0, b.Lost, next)
		}
		for c, x := range b.Counts {
			for i, v := range x {
				if want := count(c, b.Seq0+int64(i)); v != want {
					t.Fatalf("channel %d sample %d is %d, want %d", c, b.Seq0+int64(i), v, want)
				}
			}
		}
		next = b.Seq0 + int64(b.N)
		return nil
	})
	if err != nil {
		t.Error(err)
	}
	if next != to {
		t.Errorf("samples end at %d, want %d", next, to)
	}
}

// idleWriter is a second writer for tests that commit segments themselves. The tape's own one sleeps, as nothing is
// appended.
func idleWriter(t *testing.T, tp *Tape) *writer {
	t.Helper()
	flush(t, tp)
	w, err := tp.newWriter()
	if err != nil {
		t.Fatal(err)
	}
	return w
}

// numbered is a copy of a channel record with another first sample number.
func numbered(rec []byte, seq0 int64) []byte {
	rec = slices.Clone(rec)
	binary.BigEndian.PutUint64(rec[16:], uint64(seq0))
	fixChecksum(rec)
	return rec
}

// written is what the kernel says this process has written so far, 0 when it does not say.
func written() int64 {
	b, err := os.ReadFile("/proc/self/io")
	if err != nil {
		return 0
	}
	for line := range strings.Lines(string(b)) {
		if n, ok := strings.CutPrefix(line, "wchar: "); ok {
			v, _ := strconv.ParseInt(strings.TrimSpace(n), 10, 64)
			return v
		}
	}
	return 0
}
