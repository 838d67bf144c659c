package tape

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"

	"github.com/klauspost/compress/zstd"
)

// A channel record is one input's counts of one segment.
//
//	0  1  layout, 1
//	1  1  bytes per residual (planes), 1..4
//	2  2  zero
//	4  4  CRC32C of everything else: bytes 8 to the end, then bytes 0 to 3
//	8  4  n, samples
//	12 4  length of the predictor bytes
//	16 8  sample number of the first sample
//	24 .. predictor bytes (see predict.go), then each plane: 1 byte coding (0 as is, 1 zstd), 4 bytes length, bytes
//
// The counts are predicted, the residuals zigzagged and laid out in byte planes, lowest first. Packed samples alone do
// not compress; in planes, the upper bytes nearly vanish. All arithmetic is modulo 2^32, so any int32 comes back as it was.
const (
	recordLayout = 1
	recordHeader = 24
	maxSamples   = 1 << 24 // per channel and segment; bounds what a damaged header can ask for
)

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

var errRecord = errors.New("channel record")

// packer encodes and decodes channel records; it belongs to one goroutine.
type packer struct {
	enc   *zstd.Encoder
	dec   *zstd.Decoder
	fit   fitter
	res   []int32
	plane []byte
	side  []byte
}

// newPacker makes one that decodes; it encodes too when write is set.
func newPacker(write bool) (*packer, error) {
	dec, err := newDecoder()
	if err != nil || !write {
		return &packer{dec: dec}, err
	}
	// Literal entropy coding on all of it: byte planes of residuals have no repeats, and zstd would else leave them be.
	enc, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1), zstd.WithEncoderLevel(zstd.SpeedFastest),
		zstd.WithEncoderCRC(false), zstd.WithAllLitEntropyCompression(true), zstd.WithLowerEncoderMem(true))
	if err != nil {
		return nil, fmt.Errorf("tape: zstd: %w", err)
	}
	return &packer{enc: enc, dec: dec}, nil
}

func newDecoder() (*zstd.Decoder, error) {
	dec, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(64<<20))
	if err != nil {
		return nil, fmt.Errorf("tape: zstd: %w", err)
	}
	return dec, nil
}

// pack appends the record of x, whose first sample has number seq0, to dst.
func (p *packer) pack(dst []byte, x []int32, seq0 int64) []byte {
	p.res, p.side = p.fit.residuals(p.res, p.side[:0], x)
	var all uint32
	for _, r := range p.res {
		all |= zigzag(r)
	}
	planes := 1
	for planes < 4 && all>>(8*planes) != 0 {
		planes++
	}
	start := len(dst)
	dst = append(dst, recordLayout, byte(planes), 0, 0)
	dst = binary.BigEndian.AppendUint32(dst, 0) // the checksum comes last
	dst = binary.BigEndian.AppendUint32(dst, uint32(len(x)))
	dst = binary.BigEndian.AppendUint32(dst, uint32(len(p.side)))
	dst = binary.BigEndian.AppendUint64(dst, uint64(seq0))
	dst = append(dst, p.side...)
	p.plane = grown(p.plane, len(x))
	for k := range planes {
		for i, r := range p.res {
			p.plane[i] = byte(zigzag(r) >> (8 * k))
		}
		dst = p.packPlane(dst, p.plane)
	}
	binary.BigEndian.PutUint32(dst[start+4:], recordSum(dst[start:]))
	return dst
}

func (p *packer) packPlane(dst, plane []byte) []byte {
	at := len(dst)
	dst = append(dst, 1, 0, 0, 0, 0)
	dst = p.enc.EncodeAll(plane, dst)
	if len(dst)-at-5 >= len(plane) { // noise: keep the bytes as they are, they read faster
		dst = append(append(dst[:at], 0, 0, 0, 0, 0), plane...)
	}
	binary.BigEndian.PutUint32(dst[at+1:], uint32(len(dst)-at-5))
	return dst
}

// unpack gives back the counts of a record, in dst if that is large enough, and its first sample number.
func (p *packer) unpack(dst []int32, rec []byte) ([]int32, int64, error) {
	if len(rec) < recordHeader {
		return nil, 0, fmt.Errorf("%w: %d bytes, header alone has %d", errRecord, len(rec), recordHeader)
	}
	if rec[0] != recordLayout {
		return nil, 0, fmt.Errorf("%w: layout %d, this program reads %d", errRecord, rec[0], recordLayout)
	}
	if got, want := recordSum(rec), binary.BigEndian.Uint32(rec[4:]); got != want {
		return nil, 0, fmt.Errorf("%w: checksum %08x, stored %08x", errRecord, got, want)
	}
	planes, n, side := int(rec[1]), int(binary.BigEndian.Uint32(rec[8:])), int(binary.BigEndian.Uint32(rec[12:]))
	seq0 := int64(binary.BigEndian.Uint64(rec[16:]))
	rest := rec[recordHeader:]
	if planes < 1 || planes > 4 || n > maxSamples || side > len(rest) {
		return nil, 0, fmt.Errorf("%w: impossible header: %d planes, %d samples, %d predictor bytes", errRecord, planes, n, side)
	}
	predictor, rest := rest[:side], rest[side:]
	p.res = grown(p.res, n)
	clear(p.res)
	for k := range planes {
		var err error
		if p.plane, rest, err = p.unpackPlane(p.plane, rest, n); err != nil {
			return nil, 0, fmt.Errorf("%w: plane %d: %w", errRecord, k, err)
		}
		for i, b := range p.plane {
			p.res[i] |= int32(uint32(b) << (8 * k))
		}
	}
	if len(rest) != 0 {
		return nil, 0, fmt.Errorf("%w: %d bytes too many", errRecord, len(rest))
	}
	for i, z := range p.res {
		p.res[i] = unzigzag(uint32(z))
	}
	dst = grown(dst, n)
	if err := restore(dst, p.res, predictor); err != nil {
		return nil, 0, fmt.Errorf("%w: %w", errRecord, err)
	}
	return dst, seq0, nil
}

func (p *packer) unpackPlane(dst, rest []byte, n int) (plane, left []byte, err error) {
	if len(rest) < 5 {
		return nil, nil, errors.New("cut short")
	}
	coding, size := rest[0], int(binary.BigEndian.Uint32(rest[1:]))
	rest = rest[5:]
	if size > len(rest) {
		return nil, nil, errors.New("cut short")
	}
	body, left := rest[:size], rest[size:]
	switch coding {
	case 0:
		plane = append(dst[:0], body...)
	case 1:
		if plane, err = p.dec.DecodeAll(body, grown(dst, n)[:0]); err != nil {
			return nil, nil, err
		}
	default:
		return nil, nil, fmt.Errorf("coding %d is not known", coding)
	}
	if len(plane) != n {
		return nil, nil, fmt.Errorf("%d bytes for %d samples", len(plane), n)
	}
	return plane, left, nil
}

func recordSum(rec []byte) uint32 {
	return crc32.Update(crc32.Checksum(rec[8:], castagnoli), castagnoli, rec[:4])
}

// zigzag maps small numbers of either sign to small unsigned ones: 0, -1, 1, -2 … to 0, 1, 2, 3 …
func zigzag(r int32) uint32   { return uint32(r<<1) ^ uint32(r>>31) }
func unzigzag(z uint32) int32 { return int32(z>>1) ^ -int32(z&1) }

// grown gives s with length n, newly allocated only when it must be.
func grown[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}
