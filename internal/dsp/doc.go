// Package dsp holds the signal processing the line needs: Butterworth filters, robust statistics, interpolation,
// envelopes and onset picking, on plain slices.
//
// It needs: finite samples at a constant rate; rates and frequencies in Hz.
// It waits: not at all; a streaming Filter keeps its state between calls, everything else is one call.
// It emits: slices the caller provides, and numbers.
// When it cannot: design functions return an error; a statistic of nothing is NaN.
//
// Nothing here allocates per sample, reads a clock or keeps package state but whether the processor has such vectors. Results do not depend on how a stream was
// cut into blocks, nor on the processor: the inner loops stand here twice, in plain Go and for vectors of four (AVX2), and
// both give the same bits. Files *_amd64.s say in Go's terms what they repeat.
package dsp
