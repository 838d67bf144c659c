package station

import (
	"context"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/frame"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// root is the repository.
func root(t testing.TB) string {
	t.Helper()
	dir, err := os.Getwd()
	for err == nil {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			return dir
		}
		if dir == filepath.Dir(dir) {
			break
		}
		dir = filepath.Dir(dir)
	}
	t.Fatal("no go.mod above the test", err)
	return ""
}

// shared is a file of the shared folder; the test is skipped where it is not there.
func shared(t testing.TB, path ...string) string {
	t.Helper()
	dir := os.Getenv("LAPWING_SHARED")
	if dir == "" {
		dir = filepath.Join(root(t), "..", "shared")
	}
	name := filepath.Join(append([]string{dir}, path...)...)
	if _, err := os.Stat(name); err != nil {
		t.Skipf("the shared folder has no %s (set LAPWING_SHARED): %v", filepath.Join(path...), err)
	}
	return name
}

// motored is the measured data: bar absolute against crank angle, 0 at the dead centre of compression.
type motored struct {
	angle []float64   // degrees, -180.0 … 539.8
	bar   [][]float64 // one slice per cycle
}

const (
	motoredCycles = 60
	motoredStep   = 0.2
	motoredLen    = 3600 // points of a cycle of two turns
)

func loadMotored(t testing.TB) motored {
	t.Helper()
	raw, err := os.ReadFile(shared(t, "data", "motored-engine", "motored_60_cycles.txt"))
	if err != nil {
		t.Fatal(err)
	}
	m := motored{bar: make([][]float64, motoredCycles)}
	for n, line := range strings.Split(strings.TrimSpace(string(raw)), "\n") {
		cells := strings.Fields(line)
		if len(cells) != 1+motoredCycles {
			t.Fatalf("line %d has %d cells", n+1, len(cells))
		}
		for k, cell := range cells {
			v, err := strconv.ParseFloat(cell, 64)
			if err != nil {
				t.Fatalf("line %d: %v", n+1, err)
			}
			if k == 0 {
				m.angle = append(m.angle, v)
			} else {
				m.bar[k-1] = append(m.bar[k-1], v)
			}
		}
	}
	if len(m.angle) != motoredLen || m.angle[0] != -180 || math.Abs(m.angle[motoredLen-1]-539.8) > 1e-9 {
		t.Fatalf("%d points from %g to %g degrees", len(m.angle), m.angle[0], m.angle[len(m.angle)-1])
	}
	return m
}

// point is a measured point, counted on through all cycles. Before the first cycle stand copies of it, after the last
// copies of that: a recording begins before and ends after what is looked at, so that the line has found the shaft.
func (m *motored) point(i int) float64 {
	k := min(max(int(math.Floor(float64(i)/motoredLen)), 0), motoredCycles-1)
	return m.bar[k][((i%motoredLen)+motoredLen)%motoredLen]
}

// at is the pressure at a crank angle counted on through all cycles, by a cubic through the four nearest points: it
// goes through every measured point and turns no corner there.
func (m *motored) at(deg float64) float64 {
	x := (deg + 180) / motoredStep
	i := int(math.Floor(x))
	f := x - float64(i)
	a, b, c, d := m.point(i-1), m.point(i), m.point(i+1), m.point(i+2)
	return b + f/2*(c-a+f*(2*a-5*b+4*c-d+f*(3*(b-c)+d-a)))
}

const (
	motoredRPM = 990 // stated by us: the data does not tell
	motoredLed = 4   // copies of the first cycle before it, and of the last after it

	motoredStart = -180 - 720*motoredLed // crank angle of sample 0
)

// record writes the data out as the recording a rig would give: a once-per-turn pulse and 24 bit pressure counts at a
// steady speed.
func (m *motored) record(t testing.TB, sk *skid.Skid) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "motored.wav")
	const bits = 24
	w, err := wav.Create(path, wav.WriterOptions{Rate: sk.Rate, Channels: 2, Bits: bits, Skid: sk.Hash})
	if err != nil {
		t.Fatal(err)
	}
	ch, _ := sk.ChannelByID(sk.Throws[0].Ends[0].Pressure)
	gain, offset := ch.Scale(bits)
	perSample := 6 * motoredRPM / sk.Rate // degrees
	n := int((motoredCycles + 2*motoredLed) * 720 / perSample)
	b := acq.Block{Counts: [][]int32{nil, nil}}
	flush := func() {
		b.N = len(b.Counts[0])
		if err := w.Write(&b); err != nil {
			t.Fatal(err)
		}
		b.Seq0 += int64(b.N)
		b.Counts[0], b.Counts[1] = b.Counts[0][:0], b.Counts[1][:0]
	}
	for i := range n {
		deg := motoredStart + float64(i)*perSample
		b.Counts[0] = append(b.Counts[0], pulse(math.Mod(deg-motoredStart+180+sk.Throws[0].DeadCentre, 360), bits))
		b.Counts[1] = append(b.Counts[1], int32(math.Round((m.at(deg)*1e5-offset)/gain)))
		if len(b.Counts[0]) == 1000 {
			flush()
		}
	}
	flush()
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// pulse is a proximity pickup's: 5 V, edges of 0.6° whose middle stands at the mark.
func pulse(deg float64, bits int) int32 {
	if deg > 180 {
		deg -= 360
	}
	v := 5 * min(max(0, 0.5+deg/0.6), max(0, 0.5-(deg-8)/0.6), 1)
	return int32(math.Round(v / 10 * float64(int64(1)<<(bits-1))))
}

func rig(t testing.TB) *skid.Skid {
	t.Helper()
	sk, err := skid.Load(filepath.Join(root(t), "testdata", "motored", "rig.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

// turnsOf runs the first two stages as the line sets them up.
func turnsOf(t testing.TB, sk *skid.Skid, path string, each func(*turn.Turn)) {
	t.Helper()
	src, err := wav.Open(path, wav.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	fr, err := frame.New(frameConfig(sk, src.Info()))
	if err != nil {
		t.Fatal(err)
	}
	conv, err := turn.New(turnConfig(sk, src.Info()))
	if err != nil {
		t.Fatal(err)
	}
	add := func(f *frame.Frame) { conv.Add(f, each) }
	var b acq.Block
	for {
		err := src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err == nil {
			err = fr.Add(&b, add)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	fr.Flush(add)
	conv.Flush(each)
}
