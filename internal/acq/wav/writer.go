package wav

import (
	"bufio"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"time"

	"lapwing/internal/acq"
)

// WriterOptions says what a recording will hold.
type WriterOptions struct {
	Rate     float64   // samples per second and channel; the header holds it rounded to whole hertz
	Channels int       // 1 to 256
	Bits     int       // 16, 24 or 32: the codes' width in the file
	CodeBits int       // width of the converter's codes where narrower; 0 when the same
	Start    time.Time // UTC of sample number 0; zero when not known
	Skid     string    // hash of the skid file
	Label    string
	Note     string
}

// Writer writes one recording. Until Close the file is a valid streamed WAVE file, so a crash loses no samples that
// reached the disk, only the list of gaps.
type Writer struct {
	w    io.WriteSeeker
	buf  *bufio.Writer
	file *os.File // when we made it ourselves
	path string
	opt  WriterOptions
	meta Meta
	n    int64 // samples per channel written
	next int64 // sample number that follows
	data int64 // offset of the first sample
	raw  []byte
	rf64 int64 // a file longer than this becomes RF64
	err  error
	done bool
}

// Lengths of chunks in the header. The ds64 chunk takes the place of the JUNK chunk when the file has grown too long.
const (
	lenDS64 = 28
	lenFmt  = 40
)

// Create makes a recording at path. It is written under path with ".part" added and takes its name on Close, so a
// file called path is always complete.
func Create(path string, opt WriterOptions) (*Writer, error) {
	f, err := os.Create(path + ".part")
	if err != nil {
		return nil, fmt.Errorf("wav: %w", err)
	}
	w, err := NewWriter(f, opt)
	if err != nil {
		return nil, errors.Join(err, f.Close(), os.Remove(f.Name()))
	}
	w.file, w.path = f, path
	return w, nil
}

// NewWriter writes a recording to w, from w's beginning. Close does not close w.
func NewWriter(w io.WriteSeeker, opt WriterOptions) (*Writer, error) {
	switch {
	case !(opt.Rate >= 1) || opt.Rate > math.MaxUint32/4:
		return nil, fmt.Errorf("wav: rate %v Hz, want 1 to %d", opt.Rate, uint32(math.MaxUint32/4))
	case opt.Channels < 1 || opt.Channels > maxChannels:
		return nil, fmt.Errorf("wav: %d channels, want 1 to %d", opt.Channels, maxChannels)
	case opt.Bits != 16 && opt.Bits != 24 && opt.Bits != 32:
		return nil, fmt.Errorf("wav: %d bits, want 16, 24 or 32", opt.Bits)
	case opt.CodeBits != 0 && (opt.CodeBits < 2 || opt.CodeBits > opt.Bits):
		return nil, fmt.Errorf("wav: codes of %d bits in a file of %d", opt.CodeBits, opt.Bits)
	}
	m := Meta{Rate: opt.Rate, Bits: opt.CodeBits, Skid: opt.Skid, Label: opt.Label, Note: opt.Note}
	if !opt.Start.IsZero() {
		m.StartNS = opt.Start.UnixNano()
	}
	return &Writer{w: w, buf: bufio.NewWriterSize(w, 1<<16), opt: opt, meta: m, rf64: unknownSize}, nil
}

// Write appends a block. Its sample numbers must follow on those before, with exactly Lost missing; a code that does
// not fit the width is refused, and then nothing of the block is written. After an error from the disk the recording
// cannot go on.
func (w *Writer) Write(b *acq.Block) error {
	if w.err != nil {
		return w.err
	}
	if w.done {
		return errors.New("wav: write after close")
	}
	if err := w.check(b); err != nil {
		return err
	}
	if w.data == 0 {
		w.meta.Seq0, w.next = b.Seq0, b.Seq0-b.Lost
		if err := w.header(); err != nil {
			return w.fail(err)
		}
	}
	if b.Lost > 0 {
		w.lost(b.Lost, b.Note)
	}
	if b.Clip && b.N > 0 {
		w.clipped(int64(b.N), b.Note)
	}
	w.raw = encode(w.raw[:0], b, w.opt.Bits/8)
	if _, err := w.buf.Write(w.raw); err != nil {
		return w.fail(err)
	}
	w.n += int64(b.N)
	w.next = b.Seq0 + int64(b.N)
	return nil
}

func (w *Writer) check(b *acq.Block) error {
	if len(b.Counts) != w.opt.Channels {
		return fmt.Errorf("wav: write: block at sample %d has %d inputs, want %d", b.Seq0, len(b.Counts), w.opt.Channels)
	}
	if b.Lost < 0 || w.data != 0 && b.Seq0 != w.next+b.Lost {
		return fmt.Errorf("wav: write: block at sample %d (%d lost) does not follow on %d", b.Seq0, b.Lost, w.next)
	}
	if len(w.meta.Marks)+2 > maxMarks {
		return fmt.Errorf("wav: write: more than %d gaps and overloads", maxMarks)
	}
	top := int32(math.MaxInt32 >> (32 - w.opt.Bits))
	for c, x := range b.Counts {
		if len(x) != b.N {
			return fmt.Errorf("wav: write: block at sample %d: input %d has %d samples, N is %d", b.Seq0, c, len(x), b.N)
		}
		for i, v := range x {
			if v > top || v < -top-1 {
				return fmt.Errorf("wav: write: input %d, sample %d: code %d does not fit %d bits", c, b.Seq0+int64(i), v, w.opt.Bits)
			}
		}
	}
	return nil
}

// lost notes a gap before the next sample; gaps with no sample between them are one.
func (w *Writer) lost(n int64, note string) {
	for i := len(w.meta.Marks) - 1; i >= 0; i-- {
		if m := &w.meta.Marks[i]; m.Lost > 0 {
			if m.At == w.n {
				m.Lost += n
				m.Note = join(m.Note, note)
				return
			}
			break
		}
	}
	w.meta.Marks = append(w.meta.Marks, Mark{At: w.n, Lost: n, Note: note})
}

// clipped notes an overload; neighbouring stretches with the same note are one.
func (w *Writer) clipped(n int64, note string) {
	for i := len(w.meta.Marks) - 1; i >= 0; i-- {
		if m := &w.meta.Marks[i]; m.N > 0 {
			if m.At+m.N == w.n && m.Note == note {
				m.N += n
				return
			}
			break
		}
	}
	w.meta.Marks = append(w.meta.Marks, Mark{At: w.n, N: n, Note: note})
}

// Close writes the sizes and the notes, and gives the file its name. A second call does nothing.
func (w *Writer) Close() error {
	if w.done {
		return w.err
	}
	w.done = true
	if w.err == nil {
		if err := w.finish(); err != nil {
			w.err = fmt.Errorf("wav: finish: %w", err)
		}
	}
	if w.file == nil {
		return w.err
	}
	if w.err != nil { // what reached the disk stays readable under the .part name
		return errors.Join(w.err, w.file.Close())
	}
	w.err = errors.Join(w.file.Sync(), w.file.Close())
	if w.err == nil {
		w.err = os.Rename(w.file.Name(), w.path)
	}
	if w.err != nil {
		w.err = fmt.Errorf("wav: %w", w.err)
	}
	return w.err
}

// Abort throws the recording away: the .part file is removed. After Close it does nothing.
func (w *Writer) Abort() error {
	if w.done {
		return nil
	}
	w.done = true
	if w.file == nil {
		return nil
	}
	if err := errors.Join(w.file.Close(), os.Remove(w.file.Name())); err != nil {
		return fmt.Errorf("wav: abort: %w", err)
	}
	return nil
}

func (w *Writer) fail(err error) error {
	w.err = fmt.Errorf("wav: write sample %d: %w", w.next, err)
	return w.err
}

// header writes everything before the samples, with the sizes of a stream: unknown.
func (w *Writer) header() error {
	le := binary.LittleEndian
	width, ch := w.opt.Bits/8, w.opt.Channels
	rate := uint32(math.Round(w.opt.Rate))
	h := le.AppendUint32([]byte("RIFF"), unknownSize)
	h = le.AppendUint32(append(h, "WAVEJUNK"...), lenDS64)
	h = append(h, make([]byte, lenDS64)...)
	h = le.AppendUint32(append(h, "fmt "...), lenFmt)
	h = le.AppendUint16(h, tagExtensible)
	h = le.AppendUint16(h, uint16(ch))
	h = le.AppendUint32(h, rate)
	// With many channels at a great rate the byte rate does not fit its field; readers do not need it.
	h = le.AppendUint32(h, uint32(min(uint64(rate)*uint64(width*ch), math.MaxUint32)))
	h = le.AppendUint16(h, uint16(width*ch))
	h = le.AppendUint16(h, uint16(w.opt.Bits))
	h = le.AppendUint16(h, 22)
	h = le.AppendUint16(h, uint16(w.opt.Bits))
	h = le.AppendUint32(h, 0) // no loudspeaker positions
	h = le.AppendUint16(h, tagPCM)
	h = append(h, subTail[:]...)
	c, err := w.metaChunk()
	if err != nil {
		return err
	}
	h = le.AppendUint32(append(append(h, c...), "data"...), unknownSize)
	w.data = int64(len(h))
	_, err = w.buf.Write(h)
	return err
}

// metaChunk gives the chunk of notes, padded to an even length.
func (w *Writer) metaChunk() ([]byte, error) {
	j, err := json.Marshal(w.meta)
	if err != nil {
		return nil, err
	}
	if len(j)&1 == 1 {
		j = append(j, ' ')
	}
	return append(binary.LittleEndian.AppendUint32([]byte("lwng"), uint32(len(j))), j...), nil
}

// finish writes what follows the samples and patches the sizes.
func (w *Writer) finish() error {
	if w.data == 0 { // nothing was ever written: an empty recording
		if err := w.header(); err != nil {
			return err
		}
	}
	size := w.n * int64(w.opt.Channels*w.opt.Bits/8)
	total := w.data + size
	if size&1 == 1 {
		if err := w.buf.WriteByte(0); err != nil {
			return err
		}
		total++
	}
	if len(w.meta.Marks) > 0 {
		c, err := w.metaChunk()
		if err != nil {
			return err
		}
		if _, err := w.buf.Write(c); err != nil {
			return err
		}
		total += int64(len(c))
	}
	if err := w.buf.Flush(); err != nil {
		return err
	}
	le := binary.LittleEndian
	if total-8 >= w.rf64 {
		h := le.AppendUint32([]byte("RF64"), unknownSize)
		h = le.AppendUint32(append(h, "WAVEds64"...), lenDS64)
		h = le.AppendUint64(h, uint64(total-8))
		h = le.AppendUint64(h, uint64(size))
		h = le.AppendUint64(h, uint64(w.n))
		h = le.AppendUint32(h, 0)
		return w.patch(0, h) // the data chunk's own size stays unknownSize: see ds64
	}
	if err := w.patch(4, le.AppendUint32(nil, uint32(total-8))); err != nil {
		return err
	}
	return w.patch(w.data-4, le.AppendUint32(nil, uint32(size)))
}

func (w *Writer) patch(off int64, b []byte) error {
	if _, err := w.w.Seek(off, io.SeekStart); err != nil {
		return err
	}
	_, err := w.w.Write(b)
	return err
}

// encode appends the block's samples, interleaved, least byte first.
func encode(dst []byte, b *acq.Block, width int) []byte {
	for i := range b.N {
		for _, x := range b.Counts {
			v := uint32(x[i])
			switch width {
			case 2:
				dst = append(dst, byte(v), byte(v>>8))
			case 3:
				dst = append(dst, byte(v), byte(v>>8), byte(v>>16))
			default:
				dst = append(dst, byte(v), byte(v>>8), byte(v>>16), byte(v>>24))
			}
		}
	}
	return dst
}
