// Command record writes the recordings that the head-to-head runs on, each with its skid file beside it.
//
//	go run ./testdata/bench/record -kind synthetic -channels 17 -seconds 30 -out out/bench/synthetic-17.wav
//	go run ./testdata/bench/record -kind model -channels 17 -seconds 30 -out out/bench/model-17.wav
//
// Both are 16-bit, 51.2 kHz, 900 rpm: input 0 the shaft mark, then the pressures, then as many accelerometers, two of
// each a throw. "synthetic" is the shape that the shared yardstick makes for itself with --synthetic (noise on every
// input, a 4° pulse, tanh(4 sin) as pressure): it never shows a compressor's cycle. "model" is the modelled machine,
// whose valves open and close, so that every stage has its work. The same arguments give the same bytes.
package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"io"
	"log"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/model"
	"lapwing/internal/acq/wav"
	script "lapwing/internal/model"
	"lapwing/internal/skid"
)

const (
	rate = 51200
	rpm  = 900
	bits = 16
)

func main() {
	log.SetFlags(0)
	kind := flag.String("kind", "synthetic", "synthetic or model")
	channels := flag.Int("channels", 17, "1 + 4 a throw")
	seconds := flag.Float64("seconds", 30, "length")
	out := flag.String("out", "", "file to write; the skid file is put beside it")
	flag.Parse()
	if err := record(*kind, *channels, *seconds, *out); err != nil {
		log.Fatal("record: ", err)
	}
}

func record(kind string, channels int, seconds float64, out string) error {
	throws := (channels - 1) / 4
	if throws < 1 || throws > 16 || 1+4*throws != channels || out == "" {
		return errors.New("want -channels 5, 9, 13 … 65 and -out FILE")
	}
	if err := os.MkdirAll(filepath.Dir(out), 0o755); err != nil {
		return err
	}
	skidFile := strings.TrimSuffix(out, ".wav") + ".yaml"
	if err := os.WriteFile(skidFile, []byte(machine(throws)), 0o644); err != nil {
		return err
	}
	sk, err := skid.Load(skidFile)
	if err != nil {
		return err
	}
	length := time.Duration(seconds * float64(time.Second))
	var src acq.Source
	switch kind {
	case "model":
		src, err = model.Open(sk, script.Script{Step: sk.Steps[0].Code}, model.Options{Seed: 1, Bits: bits, Duration: length})
	case "synthetic":
		src = &synthetic{throws: throws, left: int(length.Seconds() * rate), rng: rand.New(rand.NewPCG(1, 2))}
	default:
		err = fmt.Errorf("kind %q is neither synthetic nor model", kind)
	}
	if err != nil {
		return err
	}
	w, err := wav.Create(out, wav.WriterOptions{Rate: rate, Channels: channels, Bits: bits, Skid: sk.Hash, Label: kind})
	if err != nil {
		return err
	}
	var b acq.Block
	for {
		if err = src.Read(context.Background(), &b); err != nil {
			break
		}
		if err = w.Write(&b); err != nil {
			break
		}
	}
	if !errors.Is(err, io.EOF) {
		return errors.Join(err, w.Abort(), src.Close())
	}
	return errors.Join(w.Close(), src.Close())
}

// synthetic is the yardstick's own test signal.
type synthetic struct {
	throws, left, at int
	rng              *rand.Rand
	buf              [][]int32
}

func (s *synthetic) Info() acq.Info {
	return acq.Info{Rate: rate, Channels: 1 + 4*s.throws, Bits: bits, Name: "synthetic"}
}

func (s *synthetic) Close() error { return nil }

func (s *synthetic) Read(_ context.Context, b *acq.Block) error {
	if s.left == 0 {
		return io.EOF
	}
	n := min(1024, s.left)
	if s.buf == nil {
		for range s.Info().Channels {
			s.buf = append(s.buf, make([]int32, 1024))
		}
	}
	*b = acq.Block{Seq0: int64(s.at), N: n, Counts: make([][]int32, len(s.buf))}
	for c := range s.buf {
		b.Counts[c] = s.buf[c][:n]
		for i := range n {
			th := 2 * math.Pi * rpm / 60 * float64(s.at+i) / rate
			v := int32(200 * s.rng.NormFloat64())
			switch {
			case c == 0 && math.Mod(th*180/math.Pi, 360) < 4:
				v += 20000
			case c > 0 && c <= 2*s.throws:
				v += int32(8000 + 6000*math.Tanh(4*math.Sin(th-0.4)))
			}
			b.Counts[c][i] = v
		}
	}
	s.at, s.left = s.at+n, s.left-n
	return nil
}

// machine is the skid file of a machine with so many double-acting throws.
func machine(throws int) string {
	var b, ch strings.Builder
	fmt.Fprintf(&b, `# Skid file of a machine made for measuring speed; see main.go beside this file's source.
lapwing: 1
id: bench-%d
name: bench machine
site: none
machine: {rated_rpm: %d, min_rpm: 500, max_rpm: 1000, rod_load_compression_kn: 110, rod_load_tension_kn: 100}
acquisition: {sampling_hz: %d}
phase:
  channel: phase
  uncertainty_deg: 0.3
  ripple: [{order: 1, amplitude_percent: 0.2, phase_deg: 25}, {order: 2, amplitude_percent: 0.7, phase_deg: 70}]
gas: {named: biomethane}
process:
  load_step: 0
  stages: [{p_suction_bar_abs: 8, p_discharge_bar_abs: 22, t_suction_c: 20}]
load_steps: [{code: 0, name: full load}]
throws:
`, throws, rpm, rate)
	fmt.Fprintf(&ch, "channels:\n  - {id: phase, input: 0, kind: phase, range_v: 10}\n")
	for t := range throws {
		fmt.Fprintf(&b, `  - {id: t%d, stage: 1, dead_centre_deg: %d, bore_mm: 220, stroke_mm: 150, rod_length_mm: 375, piston_rod_mm: 50,
     mass_piston_kg: 42, mass_crosshead_kg: 28, accelerometers: [a%dh, a%dc],
     head_end: {clearance_percent: 16, pressure: p%dh, suction: {valves: 2, flow_area_mm2: 1350, lift_mm: 1.8},
       discharge: {valves: 2, flow_area_mm2: 1250, lift_mm: 1.6}},
     crank_end: {clearance_percent: 18, pressure: p%dc, suction: {valves: 2, flow_area_mm2: 1350, lift_mm: 1.8},
       discharge: {valves: 2, flow_area_mm2: 1250, lift_mm: 1.6}}}
`, t+1, (37+90*(t%4)*5/2+23*(t/4))%360, t+1, t+1, t+1, t+1)
		for e, end := range [2]string{"h", "c"} {
			fmt.Fprintf(&ch, "  - {id: p%d%s, input: %d, kind: pressure, range_v: 10, points: [{v: 0, bar_abs: 0}, {v: 5, bar_abs: 40}], valid_max_bar_abs: 42}\n", t+1, end, 1+2*t+e)
			fmt.Fprintf(&ch, "  - {id: a%d%s, input: %d, kind: acceleration, range_v: 10, mv_per_g: 100}\n", t+1, end, 1+2*throws+2*t+e)
		}
	}
	return b.String() + ch.String()
}
