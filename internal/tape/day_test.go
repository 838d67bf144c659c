package tape

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"lapwing/internal/acq"
)

var (
	daySeconds = flag.Int("day", 16, "seconds of 17 inputs at 51.2 kHz that go through the ring; a day is 86400")
	dayQuota   = flag.Int64("day-quota", 22<<20, "bound of the ring")
	dayDir     = flag.String("day-dir", "", "folder on the disk to be measured")
	dayPack    = flag.Bool("day-pack", false, "pack every second anew, through Append, instead of writing seconds that are packed already")
	dayGroup   = flag.Int("day-together", 1, "seconds in one commit: 1 is the way of a daemon in real time, 4 that of a writer that is behind")
	dayPlain   = flag.Bool("day-plain", true, "write the same bytes to plain files in turns with it, for comparison")
)

const skidInputs = 17

// A long stretch of a skid's signals through a small quota: the file stays within its bound, what is in it can be read, and
// no more is written than is kept. The short run that always happens judges that; with -day more the figures are worth
// reading, and memory and throughput are judged as well.
func TestADayThroughASmallQuota(t *testing.T) {
	dir := *dayDir
	if dir == "" {
		dir = t.TempDir()
	}
	opt := Options{Info: acq.Info{Rate: 51200, Channels: skidInputs, Bits: 24, Name: "bench"}, MaxBytes: *dayQuota, ClipBytes: 22 << 20, Queue: time.Hour}
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	defer func() {
		if *daySeconds > 100 {
			if err := tp.Check(); err != nil {
				t.Error(err)
			}
		}
		if err := tp.Close(); err != nil {
			t.Error(err)
		}
	}()
	w := idleWriter(t, tp)
	all, err := modelled()
	if err != nil {
		t.Fatal(err)
	}
	ids := slices.Sorted(maps.Keys(all))
	b := &acq.Block{N: 51200}
	var recs [][]byte
	for c := range skidInputs {
		x := all[ids[c%len(ids)]]
		b.Counts = append(b.Counts, x)
		if c < len(ids) {
			recs = append(recs, w.pack.pack(nil, x, 0))
		} else {
			recs = append(recs, recs[c%len(ids)])
		}
	}
	plain := &plainRing{dir: dir, bound: *dayQuota}
	defer plain.clear()
	var ringTook, plainTook time.Duration
	var biggest int64
	var memory []int64
	var group []*packed
	before, began := written(), cpuSeconds(t)
	for k := range int64(*daySeconds) {
		b.Seq0 = k * 51200
		group = append(group, second(recs, k))
		last := len(group) == *dayGroup || k+1 == int64(*daySeconds)
		start := time.Now()
		switch {
		case *dayPack:
			tp.Append(b)
			if last {
				err = tp.Flush(context.Background())
			}
		case last:
			err = w.commit(group)
		}
		ringTook += time.Since(start)
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range group {
			if last && *dayPlain { // in turns with the ring; each second is on the disk before the next
				start = time.Now()
				plain.append(t, p.chans)
				plainTook += time.Since(start)
			}
		}
		if last {
			group = nil
		}
		if biggest = max(biggest, fileSize(tp.ring.path)); k%100 == 99 {
			memory = append(memory, anonymous())
		}
	}
	cpu := cpuSeconds(t) - began
	s := tp.Stats()
	if biggest > opt.MaxBytes || s.FileBytes < opt.MaxBytes*95/100 && *daySeconds > 100 || s.OldestSeq == 0 {
		t.Errorf("file %d, at most %d, bound %d; oldest %d", s.FileBytes, biggest, opt.MaxBytes, s.OldestSeq)
	}
	if float64(s.WrittenBytes) > 1.1*float64(s.KeptBytes) {
		t.Errorf("%d written, %d kept", s.WrittenBytes, s.KeptBytes)
	}
	kernel := written() - before - plain.wrote
	if kernel > 0 && float64(kernel) > 1.1*float64(s.KeptBytes) {
		t.Errorf("the kernel counts %d written, %d kept", kernel, s.KeptBytes)
	}
	for _, from := range []int64{s.OldestSeq, s.NewestSeq - 51200} {
		var got int
		err := tp.ReadSpan(Span{1, from, from + 51200}, func(r *acq.Block) error {
			for c := range r.Counts {
				if !slices.Equal(r.Counts[c], b.Counts[c]) {
					return fmt.Errorf("input %d is not what was written", c)
				}
			}
			got += r.N
			return nil
		})
		if err != nil || got != 51200 {
			t.Errorf("second at sample %d: %d samples, %v", from, got, err)
		}
	}
	t.Logf("%d s of %d inputs, %.2f MB/s kept of %.2f MB/s sampled (24 bit); file %.1f %% of its bound at most; %d s of signal in it; %.4f bytes written per byte kept, %.4f by the kernel's count",
		*daySeconds, skidInputs, float64(s.KeptBytes)/float64(*daySeconds)/1e6, skidInputs*51200*3/1e6, 100*float64(biggest)/float64(opt.MaxBytes), s.Segments, float64(s.WrittenBytes)/float64(s.KeptBytes), float64(kernel)/float64(s.KeptBytes))
	t.Logf("ring, %d s in a commit: %.1f MB/s (%.0f times real time), worst commit %v", *dayGroup, float64(s.KeptBytes)/ringTook.Seconds()/1e6, float64(*daySeconds)/ringTook.Seconds(), s.WorstCommit)
	if *dayPack {
		t.Logf("CPU %.2f %% of real time, packing and test included", 100*cpu/float64(*daySeconds))
	}
	if *dayPlain {
		t.Logf("plain files %.1f MB/s, worst write %v: the ring has %.2f of their throughput", float64(plain.wrote)/plainTook.Seconds()/1e6, plain.worst, plainTook.Seconds()/ringTook.Seconds())
	}
	if n := len(memory); n >= 8 {
		early, late := slices.Max(memory[n/4:n/2]), slices.Max(memory[n-n/4:])
		t.Logf("memory of its own: at most %.1f MB in the second quarter, %.1f MB in the last", float64(early)/1e6, float64(late)/1e6)
		if late > early+early/5+8<<20 {
			t.Errorf("memory grows: %d, %d", early, late)
		}
		if *dayPlain && !*dayPack && ringTook > plainTook {
			t.Errorf("plain append is faster: %v, ring %v", plainTook, ringTook)
		}
	}
}

// second is the k-th second, packed already.
func second(recs [][]byte, k int64) *packed {
	m := segMeta{Run: 1, Seq0: k * 51200, N: 51200, Rate: 51200, Bits: 24, Channels: len(recs)}
	meta, err := m.encode()
	if err != nil {
		panic(err)
	}
	p := &packed{meta: meta, info: segInfo{key: uint64(k + 1), run: 1, n: 51200, seq0: m.Seq0, end: m.end()}}
	for c := range recs {
		p.chans = append(p.chans, numbered(recs[c], m.Seq0))
	}
	return p
}

// plainRing is what one would do without a database: append to a file, wait for the disk, begin a new file now and then,
// and remove the oldest.
type plainRing struct {
	dir   string
	bound int64
	files []string
	f     *os.File
	size  int64 // of f
	wrote int64
	worst time.Duration
}

func (r *plainRing) append(t *testing.T, recs [][]byte) {
	start := time.Now()
	var err error
	if r.f == nil {
		name := filepath.Join(r.dir, "plain-"+strconv.FormatInt(r.wrote, 10))
		if r.f, err = os.Create(name); err != nil {
			t.Fatal(err)
		}
		r.files, r.size = append(r.files, name), 0
	}
	n := 0
	for _, rec := range recs {
		_, werr := r.f.Write(rec)
		err = errors.Join(err, werr)
		n += len(rec)
	}
	if err = errors.Join(err, unix.Fdatasync(int(r.f.Fd()))); err != nil {
		t.Fatal(err)
	}
	r.size, r.wrote = r.size+int64(n), r.wrote+int64(n)
	if r.size > r.bound/16 {
		err = r.f.Close()
		r.f = nil
		if len(r.files) > 15 {
			err = errors.Join(err, os.Remove(r.files[0]))
			r.files = r.files[1:]
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	r.worst = max(r.worst, time.Since(start))
}

func (r *plainRing) clear() {
	if r.f != nil {
		_ = r.f.Close()
	}
	for _, f := range r.files {
		_ = os.Remove(f)
	}
}

// anonymous is the memory of this process that is no file's, after a garbage collection.
func anonymous() int64 {
	runtime.GC()
	b, err := os.ReadFile("/proc/self/status")
	if err != nil {
		return 0
	}
	for line := range strings.Lines(string(b)) {
		if v, ok := strings.CutPrefix(line, "RssAnon:"); ok {
			kb, _ := strconv.ParseInt(strings.TrimSuffix(strings.TrimSpace(v), " kB"), 10, 64)
			return kb << 10
		}
	}
	return 0
}
