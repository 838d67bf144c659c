package wav

import (
	"encoding/binary"
	"testing"

	"pgregory.net/rapid"
)

// Every number of channels and frames is taken apart as it is written down, whichever form does it.
func TestDecodeSixteenBits(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		channels, frames := rapid.IntRange(1, 36).Draw(t, "channels"), rapid.IntRange(1, 40).Draw(t, "frames")
		raw := make([]byte, 2*channels*frames)
		seed := rapid.Uint32().Draw(t, "seed")
		for i := range raw {
			seed = seed*1664525 + 1013904223
			raw[i] = byte(seed >> 24)
		}
		dst := make([][]int32, channels)
		for c := range dst {
			dst[c] = make([]int32, frames)
		}
		if note := decode(dst, raw, format{width: 2}); note != "" {
			t.Fatal(note)
		}
		for c := range dst {
			for i, got := range dst[c] {
				if want := int32(int16(binary.LittleEndian.Uint16(raw[2*(i*channels+c):]))); got != want {
					t.Fatalf("channel %d, frame %d: %d, want %d", c, i, got, want)
				}
			}
		}
	})
}
