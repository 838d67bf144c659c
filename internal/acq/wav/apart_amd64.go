package wav

import "golang.org/x/sys/cpu"

// apart16 takes whole eights of channels and of frames apart and says how many channels and frames it did.
func apart16(dst [][]int32, raw []byte) (channels, frames int) {
	channels, frames = len(dst)&^7, len(dst[0])&^7
	if !cpu.X86.HasAVX2 || channels == 0 || frames == 0 {
		return 0, 0
	}
	_ = raw[2*len(dst)*len(dst[0])-1]
	for c := 0; c < channels; c += 8 {
		for _, x := range dst[c : c+8] {
			_ = x[frames-1]
		}
		apart16AVX2(&dst[c], &raw[2*c], frames, 2*len(dst))
	}
	return channels, frames
}

// apart16AVX2 takes eight channels apart, dst[0] to dst[7], from frames of so many bytes; frames is a multiple of eight,
// not zero.
//
//go:noescape
func apart16AVX2(dst *[]int32, raw *byte, frames, stride int)
