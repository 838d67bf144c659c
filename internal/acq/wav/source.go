package wav

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"

	"lapwing/internal/acq"
)

// Options of a reader. The zero value is usual.
type Options struct {
	BlockLen int // samples per channel in a block; 0 takes about 20 ms
}

// blockBytes bounds a block in memory whatever the header says; a longer BlockLen is refused.
const (
	blockSeconds = 0.02
	blockBytes   = 16 << 20
)

// Source reads one recording. It implements acq.Source.
type Source struct {
	r       io.ReaderAt
	closer  io.Closer
	info    acq.Info
	l       *layout
	raw     []byte
	counts  [][]int32 // full length; blocks hold slices of it
	view    [][]int32
	at      int64 // position in the file: samples per channel given
	seq     int64 // sample number of position at, without a gap that begins there
	gap     int   // next mark with Lost
	clip    int   // present or next mark with N
	end     error // sticky
	blockNs int64 // samples per block
}

// Open opens a recording. Errors wrap ErrFormat when the file is not one this package reads.
func Open(path string, opt Options) (*Source, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("wav: %w", err)
	}
	st, err := f.Stat()
	if err == nil && !st.Mode().IsRegular() {
		err = fmt.Errorf("wav: %s: %w: not a regular file", path, ErrFormat)
	}
	if err != nil {
		return nil, errors.Join(err, f.Close())
	}
	s, err := NewReader(f, st.Size(), filepath.Base(path), opt)
	if err != nil {
		return nil, errors.Join(err, f.Close())
	}
	s.closer = f
	return s, nil
}

// NewReader reads a recording of size bytes from r; name is what errors and Info call it. Close does not close r.
func NewReader(r io.ReaderAt, size int64, name string, opt Options) (*Source, error) {
	l, err := parse(r, size, name)
	if err != nil {
		return nil, err
	}
	n := int64(opt.BlockLen)
	switch most := int64(blockBytes) / l.frame(); {
	case n < 0 || n > most:
		return nil, fmt.Errorf("wav: %s: block length %d, want 1 to %d samples (0 for about 20 ms)", name, n, most)
	case n == 0:
		n = min(max(1, int64(math.Round(float64(l.rate)*blockSeconds))), most)
	}
	n = max(1, min(n, l.have)) // a header may promise a great rate; what is there bounds the memory
	s := &Source{r: r, l: l, blockNs: n, seq: l.meta.Seq0,
		raw: make([]byte, n*l.frame()), counts: make([][]int32, l.channels), view: make([][]int32, l.channels)}
	all := make([]int32, n*int64(l.channels))
	for i := range s.counts {
		s.counts[i] = all[int64(i)*n : int64(i+1)*n]
	}
	s.info = acq.Info{Rate: float64(l.rate), Channels: l.channels, Bits: 8 * l.width, Start: l.meta.start(), Name: name}
	if r := l.meta.Rate; math.Abs(r-s.info.Rate) <= 0.5 && r > 0 {
		s.info.Rate = r
	}
	if b := l.meta.Bits; b > 0 && b < s.info.Bits && !l.float {
		s.info.Bits = b
	}
	s.gap, s.clip = s.nextMark(0, isGap), s.nextMark(0, isClip)
	return s, nil
}

// Info describes the recording. Bits is the width of the codes in the file, 32 for float files, or the narrower
// width of the converter where our own writer noted it.
func (s *Source) Info() acq.Info { return s.info }

// Meta gives what our own writer noted; its zero value when the file is a stranger's.
func (s *Source) Meta() Meta { return s.l.meta }

// Len gives the samples per channel that are readable.
func (s *Source) Len() int64 { return s.l.have }

// Remarks tells what was odd about the file though it could be read; empty for a clean one.
func (s *Source) Remarks() []string { return s.l.remarks }

// Read gives the next block. PCM codes are given exactly. Float samples become 32 bit codes, ±1.0 being ±2^31,
// rounded to the nearest code: exact for every float of magnitude 2^-8 and more and for everything that was a 24 bit
// code before. A float beyond ±1 saturates and not-a-number becomes 0; either sets Clip and says so in Note.
// The block breaks where samples were lost and where an overload begins or ends.
func (s *Source) Read(ctx context.Context, b *acq.Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	if s.end != nil {
		return s.end
	}
	if s.at >= s.l.have {
		s.end = io.EOF
		if s.l.tail > 0 || s.l.promised > s.l.have {
			s.end = &TruncatedError{Name: s.info.Name, Got: s.at, Promised: s.l.promised, Tail: s.l.tail}
		}
		return s.end
	}
	n := min(s.blockNs, s.l.have-s.at)
	*b = acq.Block{}
	marks := s.l.meta.Marks
	if s.gap < len(marks) && marks[s.gap].At == s.at {
		b.Lost, b.Note = marks[s.gap].Lost, marks[s.gap].Note
	}
	after := s.gap
	if b.Lost > 0 {
		after = s.nextMark(s.gap+1, isGap)
	}
	if after < len(marks) {
		n = min(n, marks[after].At-s.at)
	}
	clip := s.clip
	for clip < len(marks) && marks[clip].At+marks[clip].N <= s.at {
		clip = s.nextMark(clip+1, isClip)
	}
	if clip < len(marks) {
		if k := marks[clip]; k.At > s.at {
			n = min(n, k.At-s.at)
		} else {
			n = min(n, k.At+k.N-s.at)
			b.Clip = true
			b.Note = join(b.Note, k.Note)
		}
	}
	raw := s.raw[:n*s.l.frame()]
	if err := readFull(s.r, raw, s.l.data+s.at*s.l.frame()); err != nil {
		return fmt.Errorf("wav: %s: sample %d: %w", s.info.Name, s.at, err)
	}
	for i := range s.view {
		s.view[i] = s.counts[i][:n]
	}
	if note := decode(s.view, raw, s.l.format); note != "" {
		b.Clip, b.Note = true, join(b.Note, note)
	}
	if b.Lost > 0 && s.at > 0 {
		s.seq += b.Lost
	}
	b.Seq0, b.N, b.Counts = s.seq, int(n), s.view
	s.at, s.seq, s.gap, s.clip = s.at+n, s.seq+n, after, clip
	return nil
}

// Close closes the file; a second call does nothing. Read gives io.EOF afterwards.
func (s *Source) Close() error {
	if s.end == nil {
		s.end = io.EOF
	}
	if s.closer == nil {
		return nil
	}
	c := s.closer
	s.closer = nil
	if err := c.Close(); err != nil {
		return fmt.Errorf("wav: %s: %w", s.info.Name, err)
	}
	return nil
}

func isGap(m Mark) bool  { return m.Lost > 0 }
func isClip(m Mark) bool { return m.N > 0 }

// nextMark gives the index of the next mark of a kind at or after i.
func (s *Source) nextMark(i int, kind func(Mark) bool) int {
	for i < len(s.l.meta.Marks) && !kind(s.l.meta.Marks[i]) {
		i++
	}
	return i
}

// join puts two notes together without saying the same twice.
func join(a, b string) string {
	if a == "" || a == b {
		return b
	}
	if b == "" {
		return a
	}
	return a + "; " + b
}
