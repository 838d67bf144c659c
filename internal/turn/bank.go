package turn

import "lapwing/internal/dsp"

// bank is up to four accelerometers that are filtered together.
type bank struct {
	filters *dsp.Bank
	streams []*stream
	in      [][]int32
	f, g    [][]float64 // where the impact and the leak band of the block in hand go
}

// newBank makes one. Where there is no leak band the impact band goes through both halves, to the same place.
func newBank(impact, leak dsp.SOS, streams []*stream) (*bank, error) {
	if leak == nil {
		leak = impact
	}
	n := len(streams)
	gain, offset := make([]float64, n), make([]float64, n)
	for i, s := range streams {
		gain[i], offset[i] = s.ch.Gain, s.ch.Offset
	}
	filters, err := dsp.NewBank(impact, leak, gain, offset)
	if err != nil {
		return nil, err
	}
	return &bank{filters: filters, streams: streams, in: make([][]int32, n), f: make([][]float64, n), g: make([][]float64, n)}, nil
}

// add takes samples from up to to of every input.
func (b *bank) add(counts [][]int32, from, to int) {
	for i, s := range b.streams {
		b.in[i] = counts[s.ch.Input][from:to]
		b.f[i] = s.impact.y.more(to - from)
		b.g[i] = b.f[i]
		if s.leak != nil {
			b.g[i] = s.leak.y.more(to - from)
		}
	}
	b.filters.Process(b.f, b.g, b.in)
}
