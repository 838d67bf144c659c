package wav

import (
	"bytes"
	"errors"
	"io"
	"math"
	"path/filepath"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// memFile is a file in memory.
type memFile struct {
	b   []byte
	off int64
}

func (m *memFile) Write(p []byte) (int, error) {
	if need := m.off + int64(len(p)); need > int64(len(m.b)) {
		m.b = append(m.b, make([]byte, need-int64(len(m.b)))...)
	}
	m.off += int64(copy(m.b[m.off:], p))
	return len(p), nil
}

func (m *memFile) Seek(off int64, whence int) (int64, error) {
	if whence != io.SeekStart {
		return 0, errors.New("memFile: only from the start")
	}
	m.off = off
	return off, nil
}

func open(t interface {
	Helper()
	Fatal(...any)
}, b []byte, opt Options) *Source {
	t.Helper()
	s, err := NewReader(bytes.NewReader(b), int64(len(b)), "test", opt)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func drawBlocks(t *rapid.T, channels, bits int) []acq.Block {
	lo, hi := int32(math.MinInt32>>(32-bits)), int32(math.MaxInt32>>(32-bits))
	seq := rapid.Int64Range(0, 1<<40).Draw(t, "seq0")
	var out []acq.Block
	for i := range rapid.IntRange(1, 8).Draw(t, "blocks") {
		b := acq.Block{N: rapid.IntRange(1, 40).Draw(t, "n"), Counts: make([][]int32, channels)}
		if rapid.IntRange(0, 3).Draw(t, "gap?") == 0 {
			b.Lost = rapid.Int64Range(1, 1<<33).Draw(t, "lost")
			b.Note = "overrun"
		}
		if rapid.IntRange(0, 3).Draw(t, "clip?") == 0 {
			b.Clip, b.Note = true, rapid.SampledFrom([]string{"overload", "overrun"}).Draw(t, "note")
		}
		if i > 0 {
			seq += b.Lost
		}
		b.Seq0 = seq
		seq += int64(b.N)
		for c := range b.Counts {
			b.Counts[c] = rapid.SliceOfN(rapid.Int32Range(lo, hi), b.N, b.N).Draw(t, "codes")
		}
		out = append(out, b)
	}
	return out
}

func TestRecordingComesBackTheSame(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ch := rapid.SampledFrom([]int{1, 2, 3, 17}).Draw(t, "channels")
		bits := rapid.SampledFrom([]int{16, 24, 32}).Draw(t, "bits")
		blocks := drawBlocks(t, ch, bits)
		var f memFile
		rate := rapid.Float64Range(1, 2e5).Draw(t, "rate")
		start := time.Unix(0, rapid.Int64Range(1, 1<<62).Draw(t, "start")).UTC()
		w, err := NewWriter(&f, WriterOptions{Rate: rate, Channels: ch, Bits: bits, Start: start, Label: "x"})
		if err != nil {
			t.Fatal(err)
		}
		if rapid.Bool().Draw(t, "rf64") {
			w.rf64 = 0
		}
		for i := range blocks {
			if err := w.Write(&blocks[i]); err != nil {
				t.Fatal(err)
			}
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		s := open(t, f.b, Options{BlockLen: rapid.IntRange(0, 50).Draw(t, "blocklen")})
		got, err := acqtest.Drain(s)
		if err != nil {
			t.Fatal(err)
		}
		if d := acqtest.Differ(acqtest.Join(got), acqtest.Join(blocks)); d != "" {
			t.Fatal(d)
		}
		in := s.Info()
		if in.Rate != rate || in.Bits != bits || !in.Start.Equal(start) || len(s.Remarks()) != 0 {
			t.Fatalf("info %+v, remarks %q", in, s.Remarks())
		}
	})
}

func TestSourceContract(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "rec.wav")
	w, err := Create(path, WriterOptions{Rate: 25600, Channels: 3, Bits: 24, CodeBits: 16})
	if err != nil {
		t.Fatal(err)
	}
	b := acq.Block{N: 2000, Counts: make([][]int32, 3)}
	for c := range b.Counts {
		b.Counts[c] = make([]int32, b.N)
		for i := range b.Counts[c] {
			b.Counts[c][i] = int32(int16(i*7919 + c*31))
		}
	}
	if err := w.Write(&b); err != nil {
		t.Fatal(err)
	}
	b.Seq0, b.Lost, b.Clip, b.Note = 2345, 345, true, "overrun"
	if err := w.Write(&b); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(path, Options{}); err == nil {
		t.Error("the file has its name before it is complete")
	}
	for range 2 {
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
	}
	acqtest.Run(t, func(t *testing.T) acq.Source {
		s, err := Open(path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		return s
	})
}

func TestWriterRefuses(t *testing.T) {
	good := WriterOptions{Rate: 1000, Channels: 1, Bits: 16}
	for name, opt := range map[string]WriterOptions{
		"no rate":             {Channels: 1, Bits: 16},
		"rate not a number":   {Rate: math.NaN(), Channels: 1, Bits: 16},
		"no channels":         {Rate: 1, Bits: 16},
		"too many channels":   {Rate: 1, Channels: 257, Bits: 16},
		"8 bits":              {Rate: 1, Channels: 1, Bits: 8},
		"codes wider than it": {Rate: 1, Channels: 1, Bits: 16, CodeBits: 24},
	} {
		if _, err := NewWriter(&memFile{}, opt); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
	for name, b := range map[string]acq.Block{
		"code too large": {Seq0: 1, N: 1, Counts: [][]int32{{32768}}},
		"code too small": {Seq0: 1, N: 1, Counts: [][]int32{{-32769}}},
		"hole":           {Seq0: 2, N: 1, Counts: [][]int32{{0}}},
		"going back":     {Seq0: 0, N: 1, Counts: [][]int32{{0}}},
		"wrong inputs":   {Seq0: 1, N: 1, Counts: [][]int32{{0}, {0}}},
		"wrong length":   {Seq0: 1, N: 2, Counts: [][]int32{{0}}},
	} {
		w, err := NewWriter(&memFile{}, good)
		if err != nil {
			t.Fatal(err)
		}
		if err := w.Write(&acq.Block{N: 1, Counts: [][]int32{{-32768}}}); err != nil {
			t.Fatal(err)
		}
		if err := w.Write(&b); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

func TestCrashLosesNoSamples(t *testing.T) {
	var f memFile
	w, err := NewWriter(&f, WriterOptions{Rate: 1000, Channels: 2, Bits: 16, Start: time.Unix(9, 0)})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Write(&acq.Block{Seq0: 77, N: 3, Counts: [][]int32{{1, 2, 3}, {4, 5, 6}}}); err != nil {
		t.Fatal(err)
	}
	if err := w.buf.Flush(); err != nil { // what the disk holds when the machine dies
		t.Fatal(err)
	}
	s := open(t, f.b, Options{})
	got, err := acqtest.Drain(s)
	if err != nil || len(got) != 1 || got[0].Seq0 != 77 || got[0].N != 3 || got[0].Counts[1][2] != 6 {
		t.Fatalf("%+v, %v", got, err)
	}
	if s.Info().Start.Unix() != 9 || len(s.Remarks()) != 1 {
		t.Errorf("start %v, remarks %q", s.Info().Start, s.Remarks())
	}
}

func TestEmptyRecordingIsEmpty(t *testing.T) {
	var f memFile
	w, err := NewWriter(&f, WriterOptions{Rate: 1000, Channels: 2, Bits: 16})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if got, err := acqtest.Drain(open(t, f.b, Options{})); err != nil || len(got) != 0 {
		t.Fatalf("%+v, %v", got, err)
	}
}
