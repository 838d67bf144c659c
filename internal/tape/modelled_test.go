package tape

import (
	"context"
	"sync"
	"syscall"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	source "lapwing/internal/acq/model"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// modelled is a second of every input of an example machine at 51.2 kHz, by channel.
var modelled = sync.OnceValues(func() (map[string][]int32, error) {
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		return nil, err
	}
	sk, err := skid.Parse("biomethane-two-throw.yaml", raw)
	if err != nil {
		return nil, err
	}
	src, err := source.Open(sk, model.Script{RPM: 960}, source.Options{Seed: 3, Rate: 51200, Duration: 1500 * time.Millisecond, BlockLen: 76800})
	if err != nil {
		return nil, err
	}
	defer src.Close()
	var b acq.Block
	for b.N != 76800 {
		if err := src.Read(context.Background(), &b); err != nil {
			return nil, err
		}
	}
	out := make(map[string][]int32)
	for i := range sk.Channels {
		out[sk.Channels[i].ID] = b.Counts[sk.Channels[i].Input][76800-51200:] // without the start
	}
	return out, nil
})

// The modelled machine's signals, against flac on the same counts.
func TestCompressionOfAModelledMachine(t *testing.T) {
	all, err := modelled()
	if err != nil {
		t.Fatal(err)
	}
	p, _ := newPacker(true)
	var packed, flac, raw int
	for id, x := range all {
		n := len(p.pack(nil, x, 0))
		f := flacSize(t, x)
		packed, flac, raw = packed+n, flac+f, raw+3*len(x)
		t.Logf("%-4s: %s of its 24-bit samples, %s of flac -5", id, ratio(n, 3*len(x)), ratio(n, f))
	}
	if packed > raw*6/10 {
		t.Errorf("%d bytes of %d", packed, raw)
	}
	if flac == 0 {
		t.Log("flac is not installed: not compared")
	} else if float64(packed) > 1.1*float64(flac) {
		t.Errorf("%d bytes, flac -5 takes %d", packed, flac)
	} else {
		t.Logf("together: %s of the samples, %s of flac -5", ratio(packed, raw), ratio(packed, flac))
	}
}

// BenchmarkPackMachine packs all inputs of the modelled machine. The figure that counts is the share of one core that 17
// inputs take in real time, by CPU seconds and not by the clock on the wall.
func BenchmarkPackMachine(b *testing.B) {
	all, err := modelled()
	if err != nil {
		b.Fatal(err)
	}
	p, _ := newPacker(true)
	var dst []byte
	began := cpuSeconds(b)
	for b.Loop() {
		for _, x := range all {
			dst = p.pack(dst[:0], x, 0)
		}
	}
	b.ReportMetric(100*17*(cpuSeconds(b)-began)/float64(b.N*len(all)), "%core/17ch")
	b.ReportMetric(0, "ns/op")
}

func cpuSeconds(t testing.TB) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
