package wav

import (
	"encoding/json"
	"fmt"
	"math"
	"time"
)

// Meta is what a recording knows beyond a WAVE header. It is stored as JSON in the chunk "lwng"; the last one in
// the file counts.
type Meta struct {
	StartNS int64   `json:"start_utc_ns,omitempty"` // UTC of sample number 0, ns since 1970; 0 when not known
	Seq0    int64   `json:"seq0"`                   // sample number of the first sample in the file
	Rate    float64 `json:"rate_hz,omitempty"`      // exact sampling rate; the header holds whole hertz only
	Bits    int     `json:"bits,omitempty"`         // width of the converter's codes where narrower than the file's
	Skid    string  `json:"skid,omitempty"`         // hash of the skid file the recording belongs to
	Label   string  `json:"label,omitempty"`
	Note    string  `json:"note,omitempty"`
	Marks   []Mark  `json:"marks,omitempty"` // gaps and overloads, in order
}

// Mark is something that happened to the samples: some are missing before position At, or the N samples from At on
// were overloaded. A Mark has either Lost or N.
type Mark struct {
	At   int64  `json:"at"`             // position in the file, samples per channel from its first
	Lost int64  `json:"lost,omitempty"` // samples missing immediately before At
	N    int64  `json:"n,omitempty"`    // overloaded samples from At on
	Note string `json:"note,omitempty"` // why
}

// maxMarks bounds the list (a source that stumbles more often is broken); maxMeta the bytes of the chunk.
const (
	maxMarks = 100_000
	maxMeta  = 32 << 20
)

// start gives the UTC time of sample number 0, zero when not known.
func (m *Meta) start() time.Time {
	if m.StartNS == 0 {
		return time.Time{}
	}
	return time.Unix(0, m.StartNS).UTC()
}

func parseMeta(raw []byte) (Meta, error) {
	var m Meta
	if err := json.Unmarshal(raw, &m); err != nil {
		return Meta{}, err
	}
	if len(m.Marks) > maxMarks {
		return Meta{}, fmt.Errorf("%d marks, more than %d", len(m.Marks), maxMarks)
	}
	if math.IsNaN(m.Rate) || m.Rate < 0 || m.Bits < 0 || m.Bits > 32 || m.Bits == 1 {
		return Meta{}, fmt.Errorf("rate %v, %d bits", m.Rate, m.Bits)
	}
	// Sample numbers stay far from overflow: 2^60 samples are 36 000 years at 1 MHz.
	const most = int64(1) << 60
	if m.Seq0 < -most || m.Seq0 > most {
		return Meta{}, fmt.Errorf("first sample number %d", m.Seq0)
	}
	var lost, gap, clip int64 = 0, -1, 0
	for i, k := range m.Marks {
		switch {
		case k.At < 0 || k.At > most || k.Lost < 0 || k.N < 0 || (k.Lost > 0) == (k.N > 0):
			return Meta{}, fmt.Errorf("mark %d: at %d, %d lost, %d long", i, k.At, k.Lost, k.N)
		case k.Lost > 0 && (k.At <= gap || k.Lost > most-lost):
			return Meta{}, fmt.Errorf("mark %d: gap at %d, %d lost: out of order or too many", i, k.At, k.Lost)
		case k.N > 0 && (k.At < clip || k.N > most):
			return Meta{}, fmt.Errorf("mark %d: overload at %d overlaps the one before", i, k.At)
		case k.Lost > 0:
			gap, lost = k.At, lost+k.Lost
		default:
			clip = k.At + k.N
		}
	}
	return m, nil
}
