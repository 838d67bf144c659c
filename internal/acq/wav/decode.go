package wav

import (
	"encoding/binary"
	"fmt"
	"math"
)

// decode takes interleaved little-endian samples apart into one slice per channel. The note says what could not be
// represented; empty when nothing.
func decode(dst [][]int32, raw []byte, f format) (note string) {
	switch {
	case f.float:
		return decodeFloat(dst, raw)
	case f.width == 2:
		channels, frames := apart16(dst, raw)
		for c := range dst {
			done := 0
			if c < channels {
				done = frames
			}
			x, at := dst[c][done:], 2*(len(dst)*done+c)
			for i := range x {
				x[i] = int32(int16(binary.LittleEndian.Uint16(raw[at:])))
				at += 2 * len(dst)
			}
		}
	case f.width == 3:
		for c := range dst {
			x, at := dst[c], 3*c
			for i := range x {
				b := raw[at : at+3]
				x[i] = int32(uint32(b[0])<<8|uint32(b[1])<<16|uint32(b[2])<<24) >> 8
				at += 3 * len(dst)
			}
		}
	default:
		for c := range dst {
			x, at := dst[c], 4*c
			for i := range x {
				x[i] = int32(binary.LittleEndian.Uint32(raw[at:]))
				at += 4 * len(dst)
			}
		}
	}
	return ""
}

func decodeFloat(dst [][]int32, raw []byte) (note string) {
	over, nan := 0, 0
	for c := range dst {
		x, at := dst[c], 4*c
		for i := range x {
			v := float64(math.Float32frombits(binary.LittleEndian.Uint32(raw[at:])))
			at += 4 * len(dst)
			switch {
			case v != v:
				x[i] = 0
				nan++
			case v >= 1:
				x[i] = math.MaxInt32 // 1.0 itself is one code short of 2^31 and not called an overload
				if v > 1 {
					over++
				}
			case v < -1:
				x[i] = math.MinInt32
				over++
			default:
				x[i] = int32(math.RoundToEven(v * (1 << 31)))
			}
		}
	}
	if over > 0 {
		note = fmt.Sprintf("%d samples beyond full scale", over)
	}
	if nan > 0 {
		note = join(note, fmt.Sprintf("%d samples are not a number", nan))
	}
	return note
}
