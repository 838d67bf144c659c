package wav

import (
	"bytes"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"reflect"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// The files here are put together by hand from the format's description (Microsoft/IBM "Multimedia Programming
// Interface and Data Specifications 1.0" for RIFF, EBU Tech 3306 for RF64), not by this package's writer.

func le16(v int) []byte    { return binary.LittleEndian.AppendUint16(nil, uint16(v)) }
func le32(v uint32) []byte { return binary.LittleEndian.AppendUint32(nil, v) }

func cat(parts ...any) []byte {
	var b []byte
	for _, p := range parts {
		switch p := p.(type) {
		case string:
			b = append(b, p...)
		case []byte:
			b = append(b, p...)
		}
	}
	return b
}

func fmtChunk(tag, ch, rate, bits int) []byte {
	return cat("fmt ", le32(16), le16(tag), le16(ch), le32(uint32(rate)), le32(uint32(rate*ch*bits/8)), le16(ch*bits/8), le16(bits))
}

// riff wraps chunks with the right outer size.
func riff(chunks ...any) []byte {
	b := cat(chunks...)
	return cat("RIFF", le32(uint32(len(b)+4)), "WAVE", b)
}

var (
	mono16 = fmtChunk(1, 1, 8000, 16)
	codes  = cat(le16(1), le16(-2), le16(32767)) // three samples
)

func TestReadsByHandMadeFiles(t *testing.T) {
	f32 := func(v ...float32) (b []byte) {
		for _, x := range v {
			b = append(b, le32(math.Float32bits(x))...)
		}
		return b
	}
	for name, c := range map[string]struct {
		file []byte
		want [][]int32
		clip bool
	}{
		"plain":            {riff(mono16, "data", le32(6), codes), [][]int32{{1, -2, 32767}}, false},
		"24 bit, 2 inputs": {riff(fmtChunk(1, 2, 8000, 24), "data", le32(6), []byte{1, 0, 0, 0, 0, 0x80}), [][]int32{{1}, {-8388608}}, false},
		"24 bit mono, odd length, padded, chunk after": {riff(fmtChunk(1, 1, 8000, 24), "data", le32(3), []byte{0xFF, 0xFF, 0x7F, 0}, "tail", le32(0)),
			[][]int32{{8388607}}, false},
		"32 bit":            {riff(fmtChunk(1, 1, 8000, 32), "data", le32(4), le32(0x80000000)), [][]int32{{math.MinInt32}}, false},
		"float":             {riff(fmtChunk(3, 1, 8000, 32), "data", le32(16), f32(0.5, -1, 1, 0x1p-31)), [][]int32{{1 << 30, math.MinInt32, math.MaxInt32, 1}}, false},
		"float, overloaded": {riff(fmtChunk(3, 1, 8000, 32), "data", le32(12), f32(1.5, -7, float32(math.NaN()))), [][]int32{{math.MaxInt32, math.MinInt32, 0}}, true},
		"odd chunk before":  {riff("odd ", le32(3), "abc\x00", mono16, "data", le32(6), codes), [][]int32{{1, -2, 32767}}, false},
		"odd chunk, no pad": {riff("odd ", le32(3), "abc", mono16, "data", le32(6), codes), [][]int32{{1, -2, 32767}}, false},
		"streamed, zero":    {cat("RIFF", le32(0), "WAVE", mono16, "data", le32(0), codes), [][]int32{{1, -2, 32767}}, false},
		"streamed, largest": {cat("RIFF", le32(0xFFFFFFFF), "WAVE", mono16, "data", le32(0xFFFFFFFF), codes), [][]int32{{1, -2, 32767}}, false},
		"RF64": {cat("RF64", le32(0xFFFFFFFF), "WAVE", "ds64", le32(28), le32(78), le32(0), le32(6), le32(0), le32(3), le32(0), le32(0),
			mono16, "data", le32(0xFFFFFFFF), codes, "odd ", le32(0)), [][]int32{{1, -2, 32767}}, false},
		"extensible": {riff("fmt ", le32(40), le16(0xFFFE), le16(1), le32(8000), le32(16000), le16(2), le16(16), le16(22), le16(16), le32(0),
			[]byte("\x01\x00\x00\x00\x00\x00\x10\x00\x80\x00\x00\xaa\x00\x38\x9b\x71"), "data", le32(6), codes), [][]int32{{1, -2, 32767}}, false},
		"empty, then a chunk": {riff(mono16, "data", le32(0), "tail", le32(2), "xx"), nil, false},
		"damaged lwng":        {riff(mono16, "lwng", le32(4), "{\"a:", "data", le32(6), codes), [][]int32{{1, -2, 32767}}, false},
	} {
		s, err := NewReader(bytes.NewReader(c.file), int64(len(c.file)), name, Options{})
		if err != nil {
			t.Error(err)
			continue
		}
		blocks, err := acqtest.Drain(s)
		got := acqtest.Join(blocks)
		if err != nil || !reflect.DeepEqual(got.Counts, c.want) {
			t.Errorf("%s: %v, %v; want %v", name, got.Counts, err, c.want)
		}
		if len(blocks) > 0 && blocks[0].Clip != c.clip {
			t.Errorf("%s: clip %v (%s)", name, blocks[0].Clip, blocks[0].Note)
		}
	}
}

func TestTruncatedGivesWhatIsThere(t *testing.T) {
	for name, c := range map[string]struct {
		file []byte
		want TruncatedError
		text string
	}{
		"half the data": {riff(mono16, "data", le32(600), codes), TruncatedError{Got: 3, Promised: 300},
			"3 samples per channel given, the header promised 300"},
		"inside a sample": {riff(mono16, "data", le32(600), codes, "x"), TruncatedError{Got: 3, Promised: 300, Tail: 1}, "promised 300"},
		"stream inside a sample": {cat("RIFF", le32(0), "WAVE", mono16, "data", le32(0), codes, "x"), TruncatedError{Got: 3, Promised: -1, Tail: 1},
			"inside a sample"},
		"no whole number": {riff(mono16, "data", le32(7), codes, "xy"), TruncatedError{Got: 3, Promised: 3, Tail: 1}, "no whole number"},
		"nothing at all":  {riff(mono16, "data", le32(6)), TruncatedError{Got: 0, Promised: 3}, "promised 3"},
	} {
		s := open(t, c.file, Options{BlockLen: 2})
		blocks, err := acqtest.Drain(s)
		var te *TruncatedError
		if !errors.As(err, &te) || errors.Is(err, io.EOF) {
			t.Errorf("%s: %v, want a TruncatedError that is no io.EOF", name, err)
			continue
		}
		c.want.Name = "test"
		if *te != c.want || !strings.Contains(te.Error(), c.text) {
			t.Errorf("%s: %+v (%v), want %+v", name, *te, te, c.want)
		}
		if n := len(acqtest.Join(blocks).Seq); int64(n) != te.Got {
			t.Errorf("%s: %d samples came, the error says %d", name, n, te.Got)
		}
		if again := s.Read(t.Context(), new(acq.Block)); again != err {
			t.Errorf("%s: then %v", name, again)
		}
	}
}

func TestRefusesClearly(t *testing.T) {
	for text, file := range map[string][]byte{
		"too few":                nil,
		"want RIFF or RF64":      []byte("FORM\x00\x00\x00\x00AIFF...."),
		"big-endian":             []byte("RIFX\x00\x00\x00\x00WAVE...."),
		"want WAVE":              []byte("RIFF\x00\x00\x00\x00AVI ...."),
		"no fmt":                 riff("junk", le32(0)),
		"no data":                riff(mono16),
		"before the fmt":         riff("data", le32(0)),
		"damaged fmt":            riff("fmt ", le32(8), "12345678"),
		"8 bit":                  riff(fmtChunk(1, 1, 8000, 8), "data", le32(0)),
		"format tag 0x0006":      riff(fmtChunk(6, 1, 8000, 8), "data", le32(0)),
		"float of 64":            riff(fmtChunk(3, 1, 8000, 64), "data", le32(0)),
		"0 channels":             riff(fmtChunk(1, 0, 8000, 16), "data", le32(0)),
		"257 channels":           riff(fmtChunk(1, 257, 8000, 16), "data", le32(0)),
		"rate 0":                 riff(fmtChunk(1, 1, 0, 16), "data", le32(0)),
		"bytes per sample do no": riff("fmt ", le32(16), le16(1), le16(2), le32(8000), le32(0), le16(3), le16(16), "data", le32(0)),
		"unknown sub-format":     riff("fmt ", le32(40), le16(0xFFFE), make([]byte, 38), "data", le32(0)),
		"damaged ds64":           cat("RF64", le32(0xFFFFFFFF), "WAVE", "ds64", le32(4), le32(0)),
	} {
		_, err := NewReader(bytes.NewReader(file), int64(len(file)), "test", Options{})
		if !errors.Is(err, ErrFormat) || !strings.Contains(err.Error(), text) {
			t.Errorf("want %q, got %v", text, err)
		}
	}
	b := riff(mono16, "data", le32(6), codes)
	if _, err := NewReader(bytes.NewReader(b), int64(len(b)), "test", Options{BlockLen: -1}); err == nil {
		t.Error("a negative block length was accepted")
	}
}

// failing reads as far as it may.
type failing struct {
	b   []byte
	end int64
}

var errDisk = errors.New("disk gone")

func (f failing) ReadAt(p []byte, off int64) (int, error) {
	if off+int64(len(p)) > f.end {
		return 0, errDisk
	}
	return bytes.NewReader(f.b).ReadAt(p, off)
}

func TestDiskErrorSaysWhere(t *testing.T) {
	b := riff(mono16, "data", le32(6), codes)
	s, err := NewReader(failing{b, int64(len(b)) - 2}, int64(len(b)), "rec.wav", Options{BlockLen: 1})
	if err != nil {
		t.Fatal(err)
	}
	got, err := acqtest.Drain(s)
	if len(got) != 2 || !errors.Is(err, errDisk) || !strings.Contains(err.Error(), "rec.wav: sample 2") {
		t.Errorf("%d blocks, %v", len(got), err)
	}
}

func FuzzReader(f *testing.F) {
	f.Add(riff(mono16, "data", le32(6), codes))
	f.Add(riff(fmtChunk(3, 2, 8000, 32), "odd ", le32(3), "abc\x00", "data", le32(80), codes))
	f.Add(riff(mono16, "lwng", le32(38), `{"seq0":5,"marks":[{"at":1,"lost":9}]}`, "data", le32(6), codes))
	f.Add(riff(mono16, "data", le32(6), codes, "lwng", le32(46), `{"marks":[{"at":0,"n":2},{"at":2,"lost":3},{}]}`))
	f.Add(cat("RF64", le32(0xFFFFFFFF), "WAVE", "ds64", le32(28), bytes.Repeat([]byte{0xFF}, 28), mono16, "data", le32(0xFFFFFFFF), codes))
	f.Fuzz(func(t *testing.T, b []byte) {
		s, err := NewReader(bytes.NewReader(b), int64(len(b)), "fuzz", Options{})
		if err != nil {
			if !errors.Is(err, ErrFormat) {
				t.Fatalf("%v does not say it is the format", err)
			}
			return
		}
		if len(s.raw) > max(len(b), 4*maxChannels) {
			t.Fatalf("%d bytes of buffer for a file of %d", len(s.raw), len(b))
		}
		blocks, err := acqtest.Drain(s)
		var te *TruncatedError
		if err != nil && !errors.As(err, &te) {
			t.Fatal(err)
		}
		var n int64
		for i, b := range blocks {
			if b.N < 1 || i > 0 && b.Seq0 != blocks[i-1].Seq0+int64(blocks[i-1].N)+b.Lost {
				t.Fatalf("block %d: %d samples from %d, %d lost", i, b.N, b.Seq0, b.Lost)
			}
			n += int64(b.N)
		}
		if n != s.Len() {
			t.Fatalf("%d samples, Len says %d", n, s.Len())
		}
	})
}
