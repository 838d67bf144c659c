package exec

import (
	"maps"
	"slices"
	"strings"
)

// format is how one sample lies in the stream: size bytes, the value in the topmost bits after a shift to the left that
// brings its sign to bit 31; from there it is shifted right to bits.
type format struct {
	size, bits int
	big        bool // most significant byte first
	up         int  // shift to the left
}

// The names are those of ALSA.
var formats = map[string]format{
	"s16_le": {size: 2, bits: 16, up: 16}, "s16_be": {size: 2, bits: 16, up: 16, big: true},
	"s24_3le": {size: 3, bits: 24, up: 8}, "s24_3be": {size: 3, bits: 24, up: 8, big: true},
	"s24_le": {size: 4, bits: 24, up: 8}, "s24_be": {size: 4, bits: 24, up: 8, big: true}, // in the low three bytes of four
	"s32_le": {size: 4, bits: 32}, "s32_be": {size: 4, bits: 32, big: true},
}

func formatNames() string { return strings.Join(slices.Sorted(maps.Keys(formats)), ", ") }

// unpack takes whole frames apart: out[channel][i] = code.
func (f *format) unpack(raw []byte, out [][]int32) {
	ch := len(out)
	right := 32 - f.bits
	for i := range len(raw) / (f.size * ch) {
		for c := range ch {
			b := raw[(i*ch+c)*f.size:]
			var v uint32
			for k := range f.size {
				at := k
				if !f.big {
					at = f.size - 1 - k
				}
				v = v<<8 | uint32(b[at])
			}
			out[c][i] = int32(v<<f.up) >> right
		}
	}
}
