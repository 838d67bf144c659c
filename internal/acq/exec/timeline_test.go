package exec

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// converter plays blocks of 20 ms of a converter that is ppm faster than stated, with delays up to jitter, some of a second.
type converter struct {
	t     timeline
	rng   *rand.Rand
	rate  float64 // true
	next  int64   // as counted
	taken int64   // as it was
	begun bool
	zero  time.Time
}

func newConverter(ppm float64, seed uint64) *converter {
	const rate = 10000
	return &converter{t: newTimeline(rate), rng: rand.New(rand.NewPCG(seed, 1)), rate: rate * (1 + ppm*1e-6), zero: time.Unix(1e9, 0)}
}

func (c *converter) delay() float64 {
	d := c.rng.Float64() * 0.004
	if c.rng.IntN(50) == 0 {
		d += c.rng.Float64()
	}
	return d
}

func (c *converter) clock(d float64) time.Time {
	return c.zero.Add(time.Duration((float64(c.taken)/c.rate + d) * 1e9))
}

// run plays so many seconds, and gives what the timeline says is missing.
func (c *converter) run(seconds float64) (missing int64) {
	for range int(seconds / 0.02) {
		c.taken += 200
		if !c.begun {
			c.begun = true
			c.t.begin(c.clock(0.001), 200)
		} else {
			k := c.t.see(c.clock(c.delay()), c.next+200)
			missing, c.next = missing+k, c.next+k
		}
		c.next += 200
	}
	return missing
}

// Drift and delays alone are never called a loss, and the drift is told.
func TestTimelineDrift(t *testing.T) {
	for _, ppm := range []float64{-300, -20, 0, 50, 300} {
		c := newConverter(ppm, 7)
		if k := c.run(3600); k != 0 {
			t.Errorf("%v ppm: %d samples missing that are not", ppm, k)
		}
		if got, ok := c.t.drift(); !ok || math.Abs(got-ppm) > 3 {
			t.Errorf("%v ppm: read as %v, %v", ppm, got, ok)
		}
	}
	c := newConverter(50, 7)
	c.run(300)
	if _, ok := c.t.drift(); ok {
		t.Error("a drift out of five minutes")
	}
}

// Samples that go missing while the program runs are counted once, to within the jitter, and the drift does not suffer.
func TestTimelineOverrun(t *testing.T) {
	for _, lost := range []int64{1500, 10000, 250000} {
		c := newConverter(50, 3)
		c.run(1800)
		c.taken += lost
		k := c.run(60)
		if math.Abs(float64(k-lost)) > 30 {
			t.Errorf("%d missing, read as %d", lost, k)
		}
		if more := c.run(1800); more != 0 {
			t.Errorf("%d missing: and %d more", lost, more)
		}
		if got, ok := c.t.drift(); !ok || math.Abs(got-50) > 4 {
			t.Errorf("%d missing: drift %v", lost, got)
		}
	}
}

// After a gap the count stands where the converter stood, also after a day of drift (8.6 s at 100 ppm).
func TestTimelineResumes(t *testing.T) {
	c := newConverter(-100, 5)
	c.run(24 * 3600 / 10)
	before := c.next - c.taken
	c.taken += 123456
	c.taken += 200
	k := c.t.resume(c.clock(0.001), c.next, 200)
	if math.Abs(float64(k-123456)) > 60 {
		t.Errorf("%d missed, want 123456 (count %d apart before)", k, before)
	}
	// A program that comes back with a full buffer of old samples must not send the count back.
	if k := c.t.resume(c.clock(-5), c.next+k, 200); k != 0 {
		t.Errorf("%d", k)
	}
}

// Every format against encoding/binary.
func TestFormats(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		name := rapid.SampledFrom([]string{"s16_le", "s16_be", "s24_3le", "s24_3be", "s24_le", "s24_be", "s32_le", "s32_be"}).Draw(rt, "format")
		channels := rapid.IntRange(1, 5).Draw(rt, "channels")
		f := formats[name]
		codes := rapid.SliceOfN(rapid.Int32Range(-1<<(f.bits-1), 1<<(f.bits-1)-1), channels, channels*8).Draw(rt, "codes")
		codes = codes[:len(codes)/channels*channels]
		bits := rapid.IntRange(2, f.bits).Draw(rt, "bits")
		c := Config{Command: []string{"x"}, Format: name, Channels: channels, Rate: 1, Bits: bits}
		g, err := c.check()
		if err != nil {
			rt.Fatal(err)
		}
		var raw []byte
		for _, v := range codes {
			var four [4]byte
			if strings.HasSuffix(name, "be") {
				binary.BigEndian.PutUint32(four[:], uint32(v))
				raw = append(raw, four[4-f.size:]...)
			} else {
				binary.LittleEndian.PutUint32(four[:], uint32(v))
				raw = append(raw, four[:f.size]...)
			}
		}
		n := len(codes) / channels
		out := make([][]int32, channels)
		for k := range out {
			out[k] = make([]int32, n)
		}
		g.unpack(raw, out)
		for i, v := range codes {
			if got, want := out[i%channels][i/channels], v>>(f.bits-bits); got != want {
				rt.Fatalf("%s, %d bits: code %d of channel %d is %d, want %d", name, bits, i/channels, i%channels, got, want)
			}
		}
	})
}

func TestParse(t *testing.T) {
	c, err := Parse("format=S24_3LE,channels=8,rate=48000,bits=20:arecord -q -D hw:1,0 -t raw", 51200)
	if err != nil || c.Format != "s24_3le" || c.Channels != 8 || c.Rate != 48000 || c.Bits != 20 || c.Once || strings.Join(c.Command, "|") != "arecord|-q|-D|hw:1,0|-t|raw" {
		t.Errorf("%+v %v", c, err)
	}
	if c, err := Parse("format=s16_le,channels=2,once:cat file", 51200); err != nil || !c.Once || c.Rate != 51200 {
		t.Errorf("%+v %v", c, err)
	}
	for _, s := range []string{"", "format=s16_le,channels=2", "format=s16_le,channels=2:", "channels=2:x", "format=s16_le:x", "format=s16_le,channels=two:x", "format=s16_le,channels=2,size=3:x", "format=s16_le,channels=2,once=1:x", "format=s16_le,channels=2,rate=NaN:x"} {
		if _, err := Parse(s, 51200); err == nil || !strings.HasPrefix(err.Error(), "acq/exec: ") {
			t.Errorf("%q: %v", s, err)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add("format=s24_3le,channels=8,rate=51200:arecord -q")
	f.Add("once,once:x")
	f.Fuzz(func(t *testing.T, s string) {
		c, err := Parse(s, 51200)
		if err == nil && (c.Channels < 1 || !(c.Rate > 0) || len(c.Command) == 0 || formats[c.Format].size == 0) {
			t.Errorf("%q gives %+v", s, c)
		}
	})
}
