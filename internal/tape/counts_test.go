package tape

import (
	"bytes"
	"encoding/binary"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"sync"
	"testing"

	"pgregory.net/rapid"
)

// oneSecond is made once: under the race detector it is dear.
var oneSecond = sync.OnceValue(func() map[string][]int32 { return makeSignals(51200) })

// skidSignals are the kinds of signal a skid gives, 24-bit codes at 51.2 kHz, n <= 51200; made by formula, not measured.
func skidSignals(n int) map[string][]int32 {
	out := make(map[string][]int32)
	for name, x := range oneSecond() {
		out[name] = x[:n]
	}
	return out
}

func makeSignals(n int) map[string][]int32 {
	rnd := rand.New(rand.NewPCG(7, 11))
	const rate, rev = 51200.0, 51200.0 / 12.5 // 750 rpm
	pressure, vibration, mark, idle := make([]int32, n), make([]int32, n), make([]int32, n), make([]int32, n)
	var ring [3]struct{ a, f, d float64 }
	var t0 float64
	for i := range n {
		phase := math.Mod(float64(i), rev) / rev
		p := 3e6 + 1.5e6*math.Tanh(4*math.Cos(2*math.Pi*phase)) + 2e4*math.Sin(2*math.Pi*320*float64(i)/rate)
		pressure[i] = int32(p + 150*rnd.NormFloat64())
		if i%int(rev/4) == 100 {
			t0 = float64(i)
			for k, f := range []float64{2900, 6100, 11800} {
				ring[k].a, ring[k].f, ring[k].d = 4e5*(0.7+0.3*rnd.Float64())/float64(k+1), f, 900+600*float64(k)
			}
		}
		v := 1500 * rnd.NormFloat64()
		for _, r := range ring {
			v += r.a * math.Exp(-r.d*(float64(i)-t0)/rate) * math.Sin(2*math.Pi*r.f*(float64(i)-t0)/rate)
		}
		vibration[i] = int32(v)
		if phase < 0.01 {
			mark[i] = 4_000_000
		}
		mark[i] += int32(60 * rnd.NormFloat64())
		idle[i] = int32(20 * rnd.NormFloat64())
	}
	return map[string][]int32{"pressure": pressure, "vibration": vibration, "mark": mark, "idle": idle}
}

func TestCountsComeBackExactly(t *testing.T) {
	p, err := newPacker(true)
	if err != nil {
		t.Fatal(err)
	}
	edge := []int32{math.MaxInt32, math.MinInt32, 0, -1, 1, math.MinInt32, math.MaxInt32}
	noise := make([]int32, 9000)
	rnd := rand.New(rand.NewPCG(1, 2))
	for i := range noise {
		noise[i] = int32(rnd.Uint32())
	}
	for name, x := range map[string][]int32{
		"nothing": {}, "one": {5}, "extremes": edge, "full-scale noise": noise, "constant": slices.Repeat([]int32{-8388608}, 5000),
		"square between the extremes": slices.Repeat([]int32{math.MinInt32, math.MaxInt32}, 5000),
	} {
		rec := p.pack(nil, x, 42)
		got, seq0, err := p.unpack(nil, rec)
		if err != nil || seq0 != 42 || !slices.Equal(got, x) {
			t.Errorf("%s: seq0 %d, err %v, equal %v", name, seq0, err, slices.Equal(got, x))
		}
	}
	for name, x := range skidSignals(51200) {
		got, _, err := p.unpack(nil, p.pack(nil, x, 0))
		if err != nil || !slices.Equal(got, x) {
			t.Errorf("%s: err %v, equal %v", name, err, slices.Equal(got, x))
		}
	}
}

func TestCountsRoundTripProperty(t *testing.T) {
	p, _ := newPacker(true)
	rapid.Check(t, func(rt *rapid.T) {
		shift := rapid.IntRange(0, 31).Draw(rt, "shift")
		x := rapid.SliceOfN(rapid.Int32(), 0, 600).Draw(rt, "x")
		var sum int32
		smooth := rapid.Bool().Draw(rt, "smooth")
		for i := range x {
			x[i] >>= shift
			if smooth {
				sum += x[i]
				x[i] = sum
			}
		}
		prefix := []byte("kept")
		rec := p.pack(slices.Clone(prefix), x, -3)
		if !bytes.HasPrefix(rec, prefix) {
			rt.Fatal("pack overwrote what was in dst")
		}
		got, seq0, err := p.unpack(nil, rec[len(prefix):])
		if err != nil || seq0 != -3 || !slices.Equal(got, x) {
			rt.Fatalf("seq0 %d, err %v\n got %v\nwant %v", seq0, err, got, x)
		}
	})
}

func TestEveryFlippedBitOfARecordIsSeen(t *testing.T) {
	p, _ := newPacker(true)
	rec := p.pack(nil, skidSignals(300)["vibration"], 9)
	for bit := range len(rec) * 8 {
		rec[bit/8] ^= 1 << (bit % 8)
		_, _, err := p.unpack(nil, rec)
		if err == nil {
			t.Fatalf("flipped bit %d of byte %d was not seen", bit%8, bit/8)
		}
		rec[bit/8] ^= 1 << (bit % 8)
	}
}

func FuzzUnpack(f *testing.F) {
	p, _ := newPacker(true)
	f.Add(p.pack(nil, skidSignals(64)["pressure"], 1))
	f.Add(p.pack(nil, nil, 1))
	f.Add([]byte{1, 2, 3})
	f.Fuzz(func(t *testing.T, rec []byte) {
		if len(rec) > recordHeader { // let the fuzzer past the checksum
			rec = slices.Clone(rec)
			fixChecksum(rec)
		}
		if x, _, err := p.unpack(nil, rec); err == nil && len(x) > maxSamples {
			t.Fatal("more samples than a record may have")
		}
	})
}

// TestCompression states the measured ratios; it fails only if a signal class stops compressing at all.
func TestCompression(t *testing.T) {
	p, _ := newPacker(true)
	const n = 51200
	var packed, raw int
	for _, name := range []string{"pressure", "vibration", "mark", "idle"} {
		x := skidSignals(n)[name]
		size := len(p.pack(nil, x, 0))
		packed, raw = packed+size, raw+3*n
		line := ""
		if flac := flacSize(t, x); flac > 0 {
			line = "; flac -5 needs " + ratio(flac, 3*n) + ", so this is " + ratio(size, flac) + " of flac"
		}
		t.Logf("%-9s: %s of its 24-bit samples%s", name, ratio(size, 3*n), line)
		if size >= 3*n {
			t.Errorf("%s: %d bytes for %d samples of 24 bit", name, size, n)
		}
	}
	t.Logf("together : %s", ratio(packed, raw))
}

func BenchmarkPack(b *testing.B) {
	p, _ := newPacker(true)
	x := skidSignals(51200)["vibration"]
	var dst []byte
	b.SetBytes(3 * 51200)
	for b.Loop() {
		dst = p.pack(dst[:0], x, 0)
	}
}

func BenchmarkUnpack(b *testing.B) {
	p, _ := newPacker(true)
	rec := p.pack(nil, skidSignals(51200)["vibration"], 0)
	var dst []int32
	b.SetBytes(3 * 51200)
	for b.Loop() {
		dst, _, _ = p.unpack(dst, rec)
	}
}

// flacSize is the size flac -5 gives for 24-bit samples, 0 when flac is not installed.
func flacSize(t *testing.T, x []int32) int {
	exe, err := exec.LookPath("flac")
	if err != nil {
		return 0
	}
	raw := make([]byte, 0, 3*len(x))
	for _, v := range x {
		raw = binary.LittleEndian.AppendUint32(raw, uint32(v))[:len(raw)+3]
	}
	dir := t.TempDir()
	in, out := filepath.Join(dir, "x.raw"), filepath.Join(dir, "x.flac")
	if err := os.WriteFile(in, raw, 0o600); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(exe, "-5", "-s", "--force-raw-format", "--endian=little", "--sign=signed", "--channels=1", "--bps=24",
		"--sample-rate=51200", "--no-padding", "-o", out, in)
	if msg, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("flac: %v: %s", err, msg)
	}
	st, err := os.Stat(out)
	if err != nil {
		t.Fatal(err)
	}
	return int(st.Size())
}
