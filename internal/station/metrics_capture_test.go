package station

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/panel/paneltest"
	"lapwing/internal/wire"
)

// A recording that a capture program plays as plain samples gives the turns that it gives as a file; metrics and health tell
// of the program.
func TestCaptureProgramFeedsTheLine(t *testing.T) {
	if _, err := exec.LookPath("cat"); err != nil {
		t.Skip("there is no cat to play the samples")
	}
	r := recorded(t)
	w, err := wav.Open(r.wav, wav.Options{})
	if err != nil {
		t.Fatal(err)
	}
	info, raw, samples := w.Info(), []byte(nil), int64(0)
	for {
		var b acq.Block
		err := w.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) || b.Lost > 0 { // plain samples have no gaps
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		for i := range b.N {
			for c := range b.Counts {
				raw = binary.LittleEndian.AppendUint32(raw, uint32(b.Counts[c][i]<<(32-info.Bits)))
			}
		}
		samples += int64(b.N)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "samples.raw")
	if err := os.WriteFile(file, raw, 0o600); err != nil {
		t.Fatal(err)
	}
	run := func(source string) (rpm []float64, s *Station, m *paneltest.Metrics) {
		s, err := Open(Options{SkidFile: r.skid, State: t.TempDir(), Source: source, ProcessCSV: r.csv, Fast: true, Listen: "127.0.0.1:0",
			OnTurn: func(rec *wire.Turn) {
				if rec.Valid && rec.RPM != nil {
					rpm = append(rpm, *rec.RPM)
				}
			},
			AtEnd: func(context.Context) { m, _ = scraped(t, s) }})
		if err != nil {
			t.Fatal(err)
		}
		defer func() {
			if err := s.Close(); err != nil {
				t.Error(err)
			}
		}()
		ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
		defer cancel()
		if err := errors.Join(s.Run(ctx), ctx.Err()); err != nil {
			t.Fatal(err)
		}
		return rpm, s, m
	}
	told, s, m := run(fmt.Sprintf("exec:format=s32_le,channels=%d,bits=%d,once:cat %s", info.Channels, info.Bits, file))
	filed, _, _ := run("wav:" + r.wav)
	if got := s.line.Count(); got.Samples != samples || got.Lost != 0 {
		t.Errorf("%d samples of %d, %d lost", got.Samples, samples, got.Lost)
	}
	if len(told) < 90 || len(filed) < len(told) {
		t.Fatalf("%d turns, %d from the file", len(told), len(filed))
	}
	for i := range told {
		if told[i] != filed[i] {
			t.Fatalf("turn %d: %v rpm, %v from the file", i, told[i], filed[i])
		}
	}
	for name, want := range map[string]float64{"lapwing_capture_starts_total": 1, "lapwing_capture_lost_samples_total": 0, "lapwing_capture_overruns_total": 0} {
		if got, n := m.Sum(name); n != 1 || got != want {
			t.Errorf("%s is %v", name, got)
		}
	}
}
