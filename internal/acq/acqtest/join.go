package acqtest

import (
	"fmt"

	"lapwing/internal/acq"
)

// Samples is a recording without its block cuts: what two sources must agree on.
type Samples struct {
	Seq    []int64   // sample number of every sample
	Lost   []int64   // samples missing immediately before it
	Clip   []bool    // the source reported an overload
	Note   []string  // of the stretch it lies in; empty where nothing was wrong
	Counts [][]int32 // one slice per input
}

// Join lays blocks end to end.
func Join(blocks []acq.Block) Samples {
	var s Samples
	for _, b := range blocks {
		if s.Counts == nil {
			s.Counts = make([][]int32, len(b.Counts))
		}
		for i := range b.N {
			var lost int64
			if i == 0 {
				lost = b.Lost
			}
			s.Seq = append(s.Seq, b.Seq0+int64(i))
			s.Lost = append(s.Lost, lost)
			s.Clip = append(s.Clip, b.Clip)
			note := ""
			if b.Clip || lost > 0 {
				note = b.Note
			}
			s.Note = append(s.Note, note)
		}
		for c, x := range b.Counts {
			s.Counts[c] = append(s.Counts[c], x...)
		}
	}
	return s
}

// Differ tells the first difference of two recordings, or nothing.
func Differ(a, b Samples) string {
	if len(a.Seq) != len(b.Seq) || len(a.Counts) != len(b.Counts) {
		return fmt.Sprintf("%d samples of %d inputs against %d of %d", len(a.Seq), len(a.Counts), len(b.Seq), len(b.Counts))
	}
	for i := range a.Seq {
		if a.Seq[i] != b.Seq[i] || a.Lost[i] != b.Lost[i] || a.Clip[i] != b.Clip[i] || a.Note[i] != b.Note[i] {
			return fmt.Sprintf("sample %d: number %d lost %d clip %v %q against number %d lost %d clip %v %q", i,
				a.Seq[i], a.Lost[i], a.Clip[i], a.Note[i], b.Seq[i], b.Lost[i], b.Clip[i], b.Note[i])
		}
		for c := range a.Counts {
			if a.Counts[c][i] != b.Counts[c][i] {
				return fmt.Sprintf("sample number %d, input %d: %d against %d", a.Seq[i], c, a.Counts[c][i], b.Counts[c][i])
			}
		}
	}
	return ""
}
