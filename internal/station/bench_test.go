package station

import (
	"context"
	"errors"
	"io"
	"path/filepath"
	"runtime"
	"syscall"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/alarm"
	"lapwing/internal/frame"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// stages of the line, each with what comes before it; "line" is all of it, frame to alarm, and "records" makes a whole
// record of every turn besides. Reading is counted in, encoding of records is not.
var stages = []string{"read", "frame", "turn", "window", "measure", "line", "records"}

// BenchmarkLine runs the line's stages over the recordings that testdata/bench/record has made in out/bench (make bench
// does both). What a stage costs is the difference to the one before it.
func BenchmarkLine(b *testing.B) {
	files, _ := filepath.Glob(filepath.Join("..", "..", "out", "bench", "*.wav"))
	if len(files) == 0 {
		b.Skip("no recordings in out/bench: run make bench")
	}
	for _, f := range files {
		base := f[:len(f)-len(".wav")]
		for _, s := range stages {
			b.Run(filepath.Base(base)+"/"+s, func(b *testing.B) { benchLine(b, base, s) })
		}
	}
}

// benchLine reports times real time, turns a second, cost per sample and channel, all by CPU seconds and not by the
// clock on the wall, and allocations a turn: nearly all of those in "records" are the records, which outlive the turn.
func benchLine(b *testing.B, base, stage string) {
	sk, err := skid.Load(base + ".yaml")
	if err != nil {
		b.Fatal(err)
	}
	var samples, turns int64
	began := cpu(b)
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	for b.Loop() {
		src, err := wav.Open(base+".wav", wav.Options{})
		if err != nil {
			b.Fatal(err)
		}
		l, err := NewLine(sk, src.Info(), fixed(sk), LearnPlan{}, nil, alarm.New(AlarmTiming(sk)))
		if err != nil {
			b.Fatal(err)
		}
		if stage == "line" {
			l.records = Heads
		}
		onTurn := func(t *turn.Turn) {
			turns++
			if stage == "turn" || !t.Valid() {
				return
			}
			l.prepare(t, l.proc(t.Time))
			if w := l.windows.Track(t, l.win); stage == "measure" {
				l.refine(w)
				l.measures.Measure(&l.vec, t, w, l.mea)
			}
		}
		onFrame := func(f *frame.Frame) {
			if stage != "frame" {
				l.turns.Add(f, onTurn)
			}
		}
		whole := func(*Output) { turns++ }
		var blk acq.Block
		for {
			err := src.Read(context.Background(), &blk)
			if errors.Is(err, io.EOF) {
				break
			}
			samples += int64(blk.N)
			switch {
			case err != nil || stage == "read":
			case stage == "line" || stage == "records":
				err = l.Add(&blk, whole)
			default:
				err = l.frames.Add(&blk, onFrame)
			}
			if err != nil {
				b.Fatal(err)
			}
		}
		if err := src.Close(); err != nil {
			b.Fatal(err)
		}
	}
	runtime.ReadMemStats(&after)
	s := cpu(b) - began
	b.ReportMetric(float64(samples)/sk.Rate/s, "x-real-time")
	b.ReportMetric(s*1e9/float64(samples)/float64(inputs(sk)), "ns/sample/channel")
	if turns > 0 {
		b.ReportMetric(float64(turns)/s, "turns/s")
		b.ReportMetric(float64(after.Mallocs-before.Mallocs)/float64(turns), "allocs/turn")
	}
}

// cpu is what this process has used so far, s.
func cpu(b *testing.B) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
