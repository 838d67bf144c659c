package datum

import (
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
)

// shared is a file of the shared folder; the test is skipped where it is not there.
func shared(t *testing.T, path ...string) string {
	t.Helper()
	dir := os.Getenv("LAPWING_SHARED")
	if dir == "" {
		root, err := os.Getwd()
		for err == nil && root != filepath.Dir(root) {
			if _, err := os.Stat(filepath.Join(root, "go.mod")); err == nil {
				break
			}
			root = filepath.Dir(root)
		}
		dir = filepath.Join(root, "..", "shared")
	}
	name := filepath.Join(append([]string{dir}, path...)...)
	if _, err := os.Stat(name); err != nil {
		t.Skipf("the shared folder has no %s (set LAPWING_SHARED): %v", filepath.Join(path...), err)
	}
	return name
}

// meanCycle is the mean of the 60 motored cycles as one turn from the firing dead centre to the next: its expansion, then
// its compression, Pa on a grid of 0.2°.
func meanCycle(t *testing.T) []float64 {
	t.Helper()
	raw, err := os.ReadFile(shared(t, "data", "motored-engine", "motored_60_cycles.txt"))
	if err != nil {
		t.Fatal(err)
	}
	p := make([]float64, 1800)
	for row, line := range strings.Split(strings.TrimSpace(string(raw)), "\n") {
		cells := strings.Fields(line)
		if row >= len(p) {
			break
		}
		sum := 0.0
		for _, c := range cells[1:] {
			v, err := strconv.ParseFloat(c, 64)
			if err != nil {
				t.Fatal(err)
			}
			sum += v
		}
		p[(row+900)%1800] = sum / float64(len(cells)-1) * 1e5 // rows begin 180° before the dead centre
	}
	return p
}

// A motored engine's pressure peaks ahead of the dead centre because the gas loses heat and mass: the loss angle,
// published as 0.4 to 1.3° (reference handbook.md section 7; KAIST dissertation 66913). The data's own zero is the
// encoder's and not proven (its README).
func TestMotoredEngine(t *testing.T) {
	p := meanCycle(t)
	const step = .2
	at := func(deg float64) int { return int(math.Round(math.Mod(deg+360, 360) / step)) }
	// Where the mean trace peaks: the vertex of the parabola over ±3° around the highest point.
	top := 0
	for i := range p {
		if p[i] > p[top] {
			top = i
		}
	}
	var x, y [3]float64
	for i := range 3 {
		for k := -5; k <= 5; k++ {
			y[i] += p[(top+(i-1)*11+k)%1800] / 11
		}
		x[i] = float64(top+(i-1)*11)*step - 360
	}
	peak := x[1] + 11*step/2*(y[0]-y[2])/(y[0]-2*y[1]+y[2])

	// The transducer's noise, from how far the mean trace is off a straight log-log line early in compression.
	cyl := crank.Cylinder{Bore: .086, Stroke: .075, ConRod: .118, Clearance: [2]float64{1 / 20.2, 0}}
	var lnV, lnP []float64
	for d := -118.; d < -80; d += step {
		lnV, lnP = append(lnV, math.Log(cyl.Volume(crank.HE, d))), append(lnP, math.Log(p[at(d)]))
	}
	noise := dsp.FitLine(lnV, lnP).Sigma * p[at(-100)]
	if noise < .01e5 || noise > .06e5 {
		t.Fatalf("noise of the mean trace %.3f bar", noise/1e5)
	}

	in := &Input{Cylinder: cyl, Lo: 0, Step: step, Beyond: 1e5, NoValves: true, Noise: noise}
	// Air: k at the strokes' middle temperature (about 560 K), and how it falls with temperature (any table of air). The
	// speed is not stated. The nominal compression ratio is not a measured one.
	pri := Priors{WallAt: .1, WallSD: .1, K: .015, Clearance: .006}
	for _, c := range []struct{ rpm, k, from, to float64 }{{1800, 1.38, -118, 136}, {990, 1.38, -118, 136}, {1800, 1.37, -118, 136}, {1800, 1.39, -118, 136}, {1800, 1.38, -80, 80}} {
		in.Duties = []Duty{{P: [2][]float64{p, nil}, Closed: [2][2]Range{{{at(c.from), 1800}, {0, at(c.to)}}}, Omega: []float64{c.rpm * math.Pi / 30},
			Ps: dsp.Median(p[at(-119):at(-117)]), Pd: p[top], Ts: 320, K: c.k, KSlope: -.053, RZ: 287, Turns: 60}}
		r := Estimate(in, pri)
		if !r.Valid() {
			t.Fatal(r.Reason)
		}
		loss := -(peak + r.DeadCentreDeg.X)
		t.Logf("%4.0f/min, k %.2f, %.0f to %.0f°: peak %.2f°, dead centre %+.2f ±%.2f° (by law %+.2f), loss angle %.2f°; clearance %.4f ±%.4f (nominal %.4f), zero %+.3f ±%.3f bar, k %+.3f ±%.3f, heat %.2f, rings %.2f mm², noise %.3f bar, weighed rms %.1e",
			c.rpm, c.k, c.from, c.to, peak, r.DeadCentreDeg.X, r.DeadCentreDeg.U, r.DeadCentreByLaw, loss, r.Clearance[0].X, r.Clearance[0].U, cyl.Clearance[0],
			r.Zero[0].X/1e5, r.Zero[0].U/1e5, r.K.X, r.K.U, r.HeatScale.X, 1e6*r.Area[RG].X, noise/1e5, r.RMS)
		if loss < .4 || loss > 1.3 {
			t.Errorf("loss angle %.2f°, published 0.4 to 1.3", loss)
		}
	}
}
