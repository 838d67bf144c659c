// Package acqtest holds what tests of sources and of their users need: a source in memory and the conformance
// suite that every source passes.
package acqtest

import (
	"context"
	"fmt"
	"io"

	"lapwing/internal/acq"
)

// Memory is a source over blocks that lie in memory. It copies nothing: the blocks must not change while it is read.
type Memory struct {
	info   acq.Info
	blocks []acq.Block
	next   int
	closed bool
}

// NewMemory gives a source of the blocks as they are. They must carry info.Channels inputs each.
func NewMemory(info acq.Info, blocks []acq.Block) *Memory {
	for i, b := range blocks {
		if len(b.Counts) != info.Channels {
			panic(fmt.Sprintf("acqtest: block %d has %d inputs, want %d", i, len(b.Counts), info.Channels))
		}
	}
	return &Memory{info: info, blocks: blocks}
}

// FromCounts gives a source of one gapless recording from sample number 0, cut into blocks of blockLen samples.
func FromCounts(info acq.Info, counts [][]int32, blockLen int) *Memory {
	if blockLen < 1 {
		panic("acqtest: block length must be > 0")
	}
	return NewMemory(info, Cut(acq.Block{N: len(counts[0]), Counts: counts}, func(int) int { return blockLen }))
}

// Cut splits a block into smaller ones that say the same; length(i) gives the wanted length of piece i. The pieces
// share the block's memory. Lost goes to the first piece, Clip and Note to all.
func Cut(b acq.Block, length func(i int) int) []acq.Block {
	var out []acq.Block
	for from := 0; from < b.N || len(out) == 0; {
		n := min(max(1, length(len(out))), b.N-from)
		p := acq.Block{Seq0: b.Seq0 + int64(from), N: n, Clip: b.Clip, Counts: make([][]int32, len(b.Counts))}
		if from == 0 {
			p.Lost = b.Lost
		}
		if p.Lost > 0 || p.Clip {
			p.Note = b.Note
		}
		for i := range b.Counts {
			p.Counts[i] = b.Counts[i][from : from+n]
		}
		out = append(out, p)
		from += n
	}
	return out
}

// Info describes the source.
func (m *Memory) Info() acq.Info { return m.info }

// Read gives the next block, or io.EOF after the last and after Close.
func (m *Memory) Read(ctx context.Context, b *acq.Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	if m.closed || m.next >= len(m.blocks) {
		return io.EOF
	}
	*b = m.blocks[m.next]
	m.next++
	return nil
}

// Close ends the source; a second call does nothing.
func (m *Memory) Close() error {
	m.closed = true
	return nil
}
