package tape

import (
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"time"
)

// metaLayout is the layout of a segment's meta record; a higher number is refused.
const metaLayout = 1

var metaKey = []byte("meta")

var errMeta = errors.New("meta record")

// event is a place in a segment where the source, or the tape's own queue, had something to say. A block that was
// whole and clean leaves none.
type event struct {
	Off  int    `json:"off"`            // index in the segment of the first sample it concerns
	N    int    `json:"n"`              // samples of the block that said so, at least 1
	Lost int64  `json:"lost,omitempty"` // samples missing immediately before Off
	Clip bool   `json:"clip,omitempty"`
	Note string `json:"note,omitempty"`
}

// segMeta describes a segment. Its samples are number Seq0 onwards, with the events' Lost leaving holes.
type segMeta struct {
	Layout   int          `json:"layout"`
	Run      uint32       `json:"run"`
	Seq0     int64        `json:"seq0"`
	N        int          `json:"n"` // samples stored per channel
	Rate     float64      `json:"rate"`
	Bits     int          `json:"bits"`
	Channels int          `json:"channels"`
	Start    int64        `json:"start_ns,omitempty"` // UTC of the source's sample 0; 0 unknown
	UTC0     int64        `json:"utc0_ns,omitempty"`  // UTC of sample Seq0; 0 unknown
	Source   string       `json:"source,omitempty"`
	Skid     string       `json:"skid,omitempty"` // SHA-256 of the skid file in force, hex
	Events   []event      `json:"events,omitempty"`
	Marks    []Mark       `json:"marks,omitempty"`   // phase marks that became known during the segment
	Process  []ProcessRow `json:"process,omitempty"` // the row in force at the start, then those that came
}

// end is the number after the last sample's.
func (m *segMeta) end() int64 {
	end := m.Seq0 + int64(m.N)
	for _, e := range m.Events {
		if e.Off > 0 {
			end += e.Lost
		}
	}
	return end
}

func (m *segMeta) encode() ([]byte, error) {
	m.Layout = metaLayout
	return sealed(m)
}

func decodeMeta(rec []byte) (*segMeta, error) {
	m := new(segMeta)
	if err := unseal(rec, m); err != nil {
		return nil, fmt.Errorf("%w: %w", errMeta, err)
	}
	if m.Layout != metaLayout {
		return nil, fmt.Errorf("%w: layout %d, this program reads %d", errMeta, m.Layout, metaLayout)
	}
	if m.N < 1 || m.N > maxSamples || m.Channels < 1 || !(m.Rate > 0) {
		return nil, fmt.Errorf("%w: %d samples of %d channels at %g/s", errMeta, m.N, m.Channels, m.Rate)
	}
	at := 0
	for _, e := range m.Events {
		if e.Off < at || e.N < 1 || e.Off+e.N > m.N || e.Lost < 0 {
			return nil, fmt.Errorf("%w: event at %d of %d samples is out of place", errMeta, e.Off, m.N)
		}
		at = e.Off + e.N
	}
	return m, nil
}

// sealed is a JSON record behind its CRC32C.
func sealed(v any) ([]byte, error) {
	body, err := json.Marshal(v)
	if err != nil {
		return nil, err
	}
	rec := binary.BigEndian.AppendUint32(make([]byte, 0, 4+len(body)), crc32.Checksum(body, castagnoli))
	return append(rec, body...), nil
}

func unseal(rec []byte, v any) error {
	if len(rec) < 4 {
		return errors.New("cut short")
	}
	if got, want := crc32.Checksum(rec[4:], castagnoli), binary.BigEndian.Uint32(rec); got != want {
		return fmt.Errorf("checksum %08x, stored %08x", got, want)
	}
	return json.Unmarshal(rec[4:], v)
}

// segInfo is what is known of a segment without touching it: the idx record, kept in memory for every segment.
type segInfo struct {
	key       uint64 // segment number
	run       uint32
	n         uint32
	seq0, end int64
	utc0      int64 // ns, 0 unknown
	size      int64 // bytes it takes in the file, reckoned high
	skid      [4]byte
}

const idxRecord = 48

func (s *segInfo) encode() []byte {
	b := make([]byte, 0, idxRecord)
	b = binary.BigEndian.AppendUint32(b, s.run)
	b = binary.BigEndian.AppendUint32(b, s.n)
	b = binary.BigEndian.AppendUint64(b, uint64(s.seq0))
	b = binary.BigEndian.AppendUint64(b, uint64(s.end))
	b = binary.BigEndian.AppendUint64(b, uint64(s.utc0))
	b = binary.BigEndian.AppendUint64(b, uint64(s.size))
	b = append(b, s.skid[:]...)
	return binary.BigEndian.AppendUint32(b, crc32.Checksum(b, castagnoli))
}

func decodeInfo(key, rec []byte) (segInfo, error) {
	if len(key) != 8 || len(rec) != idxRecord {
		return segInfo{}, fmt.Errorf("idx record of %d+%d bytes", len(key), len(rec))
	}
	if crc32.Checksum(rec[:44], castagnoli) != binary.BigEndian.Uint32(rec[44:]) {
		return segInfo{}, fmt.Errorf("idx record %d: checksum", binary.BigEndian.Uint64(key))
	}
	return segInfo{
		key: binary.BigEndian.Uint64(key),
		run: binary.BigEndian.Uint32(rec), n: binary.BigEndian.Uint32(rec[4:]),
		seq0: int64(binary.BigEndian.Uint64(rec[8:])), end: int64(binary.BigEndian.Uint64(rec[16:])),
		utc0: int64(binary.BigEndian.Uint64(rec[24:])), size: int64(binary.BigEndian.Uint64(rec[32:])),
		skid: [4]byte(rec[40:44]),
	}, nil
}

// endUTC is the time after the last sample, absent when the source's clock was not tied to UTC.
func (s *segInfo) endUTC(rate float64) (time.Time, bool) {
	if s.utc0 == 0 {
		return time.Time{}, false
	}
	return time.Unix(0, s.utc0).UTC().Add(time.Duration(float64(s.end-s.seq0) / rate * 1e9)), true
}

// packed is a segment as it lies in the file.
type packed struct {
	info  segInfo
	meta  []byte
	chans [][]byte
}

// payload is the bytes of the segment's own records.
func (p *packed) payload() int64 {
	size := int64(len(p.meta))
	for _, c := range p.chans {
		size += int64(len(c))
	}
	return size
}

// footprint reckons, on the high side, the bytes the segment takes in the file. bbolt fills pages of 4096 bytes and
// gives large values a run of pages for every two of them.
func (p *packed) footprint() int64 {
	keys := int64(len(p.chans) + 1)
	return p.payload() + 24*keys + 2048*(keys/2+1) + 4096
}

// footprint is that of several.
func footprint(ps []*packed) (sum int64) {
	for _, p := range ps {
		sum += p.footprint()
	}
	return sum
}

func bigEndian(key uint64) []byte { return binary.BigEndian.AppendUint64(nil, key) }

func channelKey(c int) []byte { return binary.BigEndian.AppendUint16(nil, uint16(c)) }
