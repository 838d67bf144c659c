package wav

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// Format tags of the fmt chunk.
const (
	tagPCM        = 0x0001
	tagFloat      = 0x0003
	tagExtensible = 0xFFFE
)

// subTail is the part that all media-type GUIDs of the registered wave format tags share; the first two bytes of
// the GUID are the tag.
var subTail = [14]byte{0x00, 0x00, 0x00, 0x00, 0x10, 0x00, 0x80, 0x00, 0x00, 0xAA, 0x00, 0x38, 0x9B, 0x71}

// unknownSize is what writers to a pipe leave in a size field, and what RF64 puts there for "see ds64".
const unknownSize = 0xFFFFFFFF

// pipeSize is the length that some writers promise when they cannot seek back: the largest round one under 2 GiB.
const pipeSize = 0x7FFFF000

const (
	maxChannels = 256
	maxChunks   = 10_000
)

type format struct {
	channels int
	rate     uint32
	width    int // bytes of one code in the file: 2, 3 or 4
	float    bool
}

func (f format) frame() int64 { return int64(f.channels * f.width) }

// layout is where everything lies in a file.
type layout struct {
	format
	data     int64 // offset of the first sample
	have     int64 // whole samples per channel that are there
	promised int64 // samples per channel the header promised, -1 when none
	tail     int64 // bytes after the last whole sample that belong to the data
	meta     Meta
	remarks  []string
}

type chunk struct {
	id   string
	off  int64 // of the body
	size int64 // as stated
}

// parse walks the chunks of a file of the given length.
func parse(r io.ReaderAt, size int64, name string) (*layout, error) {
	var head [12]byte
	if err := readFull(r, head[:], 0); err != nil {
		return nil, bad(name, "%d bytes are too few for a header", size)
	}
	switch string(head[:4]) {
	case "RIFF", "RF64":
	case "RIFX":
		return nil, bad(name, "big-endian RIFX is not supported; convert it to little-endian RIFF")
	default:
		return nil, bad(name, "begins with %q, want RIFF or RF64", head[:4])
	}
	if string(head[8:]) != "WAVE" {
		return nil, bad(name, "form %q, want WAVE", head[8:])
	}
	l := &layout{promised: -1}
	p := parser{r: r, end: size, name: name, l: l,
		riff: int64(binary.LittleEndian.Uint32(head[4:])), ds64: -1}
	if err := p.walk(string(head[:4]) == "RF64"); err != nil {
		return nil, err
	}
	return l, nil
}

type parser struct {
	r              io.ReaderAt
	end            int64 // length of the file
	name           string
	l              *layout
	riff           int64 // size field of the outer chunk
	ds64           int64 // data size from ds64, -1 when absent
	haveFmt, haveD bool
}

func (p *parser) remark(format string, args ...any) {
	if len(p.l.remarks) < 20 {
		p.l.remarks = append(p.l.remarks, fmt.Sprintf(format, args...))
	}
}

func (p *parser) walk(rf64 bool) error {
	at := int64(12)
	for n := 0; at+8 <= p.end; n++ {
		if n == maxChunks {
			if !p.haveD {
				return bad(p.name, "more than %d chunks before the samples", maxChunks)
			}
			p.remark("more than %d chunks; the rest was not read", maxChunks)
			break
		}
		var h [8]byte
		if err := readFull(p.r, h[:], at); err != nil {
			if p.haveD {
				p.remark("after the samples: %v", err)
				break
			}
			return fmt.Errorf("wav: %s: chunk at byte %d: %w", p.name, at, err)
		}
		c := chunk{id: string(h[:4]), off: at + 8, size: int64(binary.LittleEndian.Uint32(h[4:]))}
		if p.haveD && !fourCC(c.id) {
			p.remark("byte %d: no chunk after the samples, the rest was not read", at)
			break
		}
		next, err := p.chunk(c, rf64)
		if err != nil {
			return err
		}
		at = next
	}
	switch {
	case !p.haveFmt:
		return bad(p.name, "no fmt chunk")
	case !p.haveD:
		return bad(p.name, "no data chunk")
	}
	return nil
}

// chunk deals with one chunk and gives the offset of the next.
func (p *parser) chunk(c chunk, rf64 bool) (next int64, err error) {
	switch c.id {
	case "ds64":
		var b [24]byte
		if c.size < 24 || readFull(p.r, b[:], c.off) != nil {
			return 0, bad(p.name, "damaged ds64 chunk")
		}
		if rf64 {
			p.riff = clampSize(binary.LittleEndian.Uint64(b[0:]))
			p.ds64 = clampSize(binary.LittleEndian.Uint64(b[8:]))
		} else {
			p.remark("ds64 chunk in a RIFF file ignored")
		}
	case "fmt ":
		if p.haveFmt {
			p.remark("second fmt chunk ignored")
			break
		}
		if err := p.format(c); err != nil {
			return 0, err
		}
		p.haveFmt = true
	case "data":
		if p.haveD {
			p.remark("second data chunk of %d bytes ignored", c.size)
			break
		}
		if !p.haveFmt {
			return 0, bad(p.name, "data chunk before the fmt chunk")
		}
		p.haveD = true
		c.size = p.samples(c)
	case "lwng":
		p.meta(c)
	}
	next = c.off + c.size
	if c.size&1 == 1 {
		next = p.pad(next)
	}
	return next, nil
}

// pad steps over the pad byte of an odd chunk. Some writers forget it: then a chunk begins right here.
func (p *parser) pad(at int64) int64 {
	var b [5]byte
	if at+5 <= p.end && readFull(p.r, b[:], at) == nil && fourCC(string(b[:4])) && !fourCC(string(b[1:5])) {
		p.remark("byte %d: odd chunk without its pad byte", at)
		return at
	}
	return at + 1
}

// samples works out how many samples there are and gives the chunk's true size in bytes.
func (p *parser) samples(c chunk) int64 {
	l, there := p.l, p.end-c.off
	stated := c.size
	if stated == unknownSize && p.ds64 >= 0 {
		stated = p.ds64
	}
	// A writer that cannot seek back leaves the sizes at zero or at their largest. A zero that agrees with the outer
	// size (the file ends there, or other chunks follow and are counted) is a truly empty recording.
	streamed := stated == unknownSize || stated == pipeSize && there < pipeSize ||
		stated == 0 && p.riff+8 < p.end || stated == 0 && p.riff >= unknownSize
	l.data = c.off
	avail := stated
	if streamed || avail > there {
		avail = there
	}
	l.have, l.tail = avail/l.frame(), avail%l.frame()
	if streamed {
		p.remark("the header promises no length: read to the end of the file")
		return avail
	}
	l.promised = stated / l.frame()
	return stated
}

func (p *parser) format(c chunk) error {
	var b [40]byte
	n := min(c.size, int64(len(b)))
	if n < 16 || readFull(p.r, b[:n], c.off) != nil {
		return bad(p.name, "damaged fmt chunk of %d bytes", c.size)
	}
	le := binary.LittleEndian
	tag, align, bits := le.Uint16(b[0:]), int(le.Uint16(b[12:])), int(le.Uint16(b[14:]))
	f := format{channels: int(le.Uint16(b[2:])), rate: le.Uint32(b[4:])}
	if tag == tagExtensible {
		if n < 40 || [14]byte(b[26:40]) != subTail {
			return bad(p.name, "extensible format with an unknown sub-format")
		}
		tag = le.Uint16(b[24:])
		if valid := int(le.Uint16(b[18:])); valid != 0 && valid != bits {
			p.remark("%d valid bits in %d: codes are read at the full width", valid, bits)
		}
	}
	if f.channels < 1 || f.channels > maxChannels {
		return bad(p.name, "%d channels, want 1 to %d", f.channels, maxChannels)
	}
	if f.rate == 0 {
		return bad(p.name, "sampling rate 0")
	}
	if align%f.channels != 0 || align == 0 {
		return bad(p.name, "%d bytes per sample do not divide among %d channels", align, f.channels)
	}
	f.width = align / f.channels
	switch tag {
	case tagPCM:
		// Codes narrower than their container sit at its upper end, so the container's width is the code's.
		if f.width < 2 || f.width > 4 || bits > 8*f.width || bits <= 8*(f.width-2) {
			return bad(p.name, "PCM of %d bits in %d bytes; 16, 24 and 32 bits are read (8 bit is too coarse to be of use)",
				bits, f.width)
		}
	case tagFloat:
		if f.width != 4 || bits != 32 {
			return bad(p.name, "float of %d bits; only 32 bit is read", bits)
		}
		f.float = true
	default:
		return bad(p.name, "format tag %#04x; PCM (1) and 32 bit float (3) are read", tag)
	}
	p.l.format = f
	return nil
}

func (p *parser) meta(c chunk) {
	if c.size > maxMeta || c.off+c.size > p.end {
		p.remark("lwng chunk of %d bytes ignored: too long or cut off", c.size)
		return
	}
	raw := make([]byte, c.size)
	if err := readFull(p.r, raw, c.off); err != nil {
		p.remark("lwng chunk: %v", err)
		return
	}
	m, err := parseMeta(raw)
	if err != nil {
		p.remark("lwng chunk ignored: %v", err)
		return
	}
	p.l.meta = m
}

// clampSize keeps a 64 bit size from the file within what offsets can hold.
func clampSize(v uint64) int64 { return int64(min(v, 1<<61)) }

func fourCC(s string) bool {
	for i := range len(s) {
		if s[i] < ' ' || s[i] > '~' {
			return false
		}
	}
	return true
}

// readFull reads all of b at off; a short read is an error.
func readFull(r io.ReaderAt, b []byte, off int64) error {
	n, err := r.ReadAt(b, off)
	if n == len(b) {
		return nil
	}
	if err == nil || errors.Is(err, io.EOF) {
		return io.ErrUnexpectedEOF
	}
	return err
}
