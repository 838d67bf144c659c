package verdict

import (
	"math"
	"testing"

	"lapwing/internal/duty"
	"lapwing/internal/measure"

	"pgregory.net/rapid"
)

// blockOf is a block whose deviations are z spreads of about what the machine's blocks scatter by.
func blockOf(s *synth, turn int64, z func(i int, f *measure.Feature) float64) duty.Block {
	blk := duty.Block{Turn0: turn - 14, Turn1: turn, Seq0: 1000 * turn, Seq1: 1000*turn + 999, Time: float64(turn) * 0.08, Settled: true,
		Point: duty.Point{State: duty.Steady, Step: 1, RPM: 750, Ps: 20e5, Pd: 50e5}}
	for i := range s.layout {
		f := &s.layout[i]
		sd, ok := synthSD[f.Name]
		if f.Name == "leak_percent" || f.Name == "leak_shape" || f.Name == "peak_g" {
			sd, ok = [2]float64{.3, .06}, true
		}
		if !ok {
			continue
		}
		v := z(i, f)
		if math.IsNaN(v) {
			continue
		}
		spread := math.Abs((sd[0]/3 + sd[1]) / f.Scale)
		base := 10.0 / f.Scale
		blk.Dev = append(blk.Dev, duty.Deviation{Feature: i, Value: base + v*spread, Expected: base, Residual: v * spread, Spread: spread, Z: v, N: 15, Seen: true})
	}
	return blk
}

// However strong and whatever pattern one class of signal shows, while the others are as always: never more than an
// advisory on a part, and on a sensor never more than that either.
func TestOneClassIsAnAdvisoryAtMost(t *testing.T) {
	s := newSynth(1)
	rapid.Check(t, func(t *rapid.T) {
		loud := rapid.SampledFrom([]measure.Class{measure.Pressure, measure.Vibration, measure.Temperature}).Draw(t, "class")
		size := rapid.Float64Range(2, 40).Draw(t, "size")
		dir := rapid.SliceOfN(rapid.Float64Range(-1, 1), len(s.layout), len(s.layout)).Draw(t, "direction")
		quiet := rapid.SliceOfN(rapid.Float64Range(-1, 1), len(s.layout), len(s.layout)).Draw(t, "rest")
		j := New(s.layout, Config{})
		for n := range int64(8) {
			wobble := rapid.Float64Range(0.7, 1.3).Draw(t, "wobble")
			fs := j.Judge(blockOf(s, 100+15*n, func(i int, f *measure.Feature) float64 {
				if f.Class == loud {
					return size * dir[i] * wobble
				}
				return quiet[i]
			}))
			for _, f := range fs {
				if f.Grade > Advisory {
					x, _ := j.Explain()
					for _, c := range x.Cases {
						if c.Subject == f.Subject && c.Kind == f.Kind {
							t.Logf("%+v", c.Classes)
						}
					}
					t.Fatalf("%v alone: %s", loud, f.Sentence)
				}
			}
		}
	})
}

// Whatever the blocks show: an alert has two classes behind it when it is raised, and while a sensor's finding stands its
// signal speaks in no finding about a part.
func TestDoubtfulSensorsAreSilent(t *testing.T) {
	s := newSynth(1)
	zs := rapid.OneOf(rapid.Float64Range(-1.5, 1.5), rapid.Float64Range(-1.5, 1.5), rapid.Float64Range(-12, 12), rapid.Just(math.NaN()))
	doubts := 0
	rapid.Check(t, func(t *rapid.T) {
		j := New(s.layout, Config{})
		z := rapid.SliceOfN(zs, len(s.layout), len(s.layout)).Draw(t, "z")
		// On top of anything: an error of a sensor by its own pattern.
		end := rapid.IntRange(0, 1).Draw(t, "end")
		amount := rapid.Float64Range(0, 15).Draw(t, "error")
		gain := rapid.SampledFrom([]float64{0, 0, 0.8, -0.8}).Draw(t, "gain")
		grades := map[string]Grade{}
		for n := range int64(7) {
			fs := j.Judge(blockOf(s, 100+15*n, func(i int, f *measure.Feature) float64 {
				v := z[i]
				if f.End == end && f.Class == measure.Pressure && f.Subject == "t1."+endName[end] {
					for k, name := range patternNames {
						if name == f.Name {
							sd := synthSD[name]
							v += amount * patternOf(zeroTable, 2.5)[k] / (sd[0]/3 + sd[1])
						}
					}
				}
				if gain != 0 && f.Class == measure.Vibration && (f.Name == "impact_norm_ln" || f.Name == "leak_noise_db") {
					sd := synthSD[f.Name]
					v = gain * map[string]float64{"impact_norm_ln": 1, "leak_noise_db": 20 / math.Ln10}[f.Name] / (sd[0]/3 + sd[1])
				}
				return v
			}))
			if n < 4 { // nothing is raised before the third, and what stands is looked at in all that follow
				for _, f := range fs {
					grades[f.Subject+f.Kind] = f.Grade
				}
				continue
			}
			x, ok := j.Explain()
			if !ok {
				t.Fatal("no explanation")
			}
			var doubt [2]bool
			deaf := false
			for _, c := range x.Cases {
				if !c.Sensor || c.Grade == None {
					continue
				}
				doubts++
				switch {
				case c.Kind == AccelGain:
					deaf = true
				case c.Subject == "t1.he":
					doubt[0] = true
				case c.Subject == "t1.ce":
					doubt[1] = true
				default:
					doubt = [2]bool{true, true}
				}
			}
			for _, c := range x.Cases {
				if c.Sensor || !c.Judged {
					continue
				}
				p, v := c.Classes[measure.Pressure].LLR, c.Classes[measure.Vibration].LLR
				e := map[bool]int{true: 0, false: 1}[len(c.Subject) > 5 && c.Subject[:5] == "t1.he"]
				both := c.Subject == "t1.rings"
				if !math.IsNaN(p) && (doubt[e] || both && (doubt[0] || doubt[1])) {
					t.Fatalf("%s %s hears a pressure in doubt", c.Subject, c.Kind)
				}
				if !math.IsNaN(v) && deaf {
					t.Fatalf("%s %s hears an accelerometer in doubt", c.Subject, c.Kind)
				}
				strong := 0
				for _, cl := range c.Classes {
					if cl.Median >= alertClass {
						strong++
					}
				}
				if key := c.Subject + c.Kind; c.Grade >= Alert && grades[key] < Alert && strong < 2 {
					t.Fatalf("%s %s became %v on %d classes", c.Subject, c.Kind, c.Grade, strong)
				}
			}
			for _, f := range fs {
				grades[f.Subject+f.Kind] = f.Grade
				if f.Grade > None && len(f.Evidence) == 0 && f.Turn == 100+15*n && !held(&x, f) {
					t.Errorf("a finding without evidence: %s", f.Sentence)
				}
			}
		}
	})
	if doubts == 0 {
		t.Error("no sensor was ever in doubt: the test tests nothing")
	}
}

// held tells whether a finding only stands because it does not fade at once.
func held(x *Explanation, f Finding) bool {
	for _, c := range x.Cases {
		if c.Subject == f.Subject && c.Kind == f.Kind {
			for _, v := range c.Classes {
				if v.LLR > 0 {
					return false
				}
			}
		}
	}
	return true
}

// A pattern of a leak, however strong, is none while the fit to the closed strokes finds no leak on its path: a clipped
// transducer raised the volumetric efficiency by 29 points and leaked nothing (station's TestSoakSensors).
func TestNoLeakWithoutAnArea(t *testing.T) {
	s := newSynth(1)
	for _, area := range []float64{0, 8} {
		j := New(s.layout, Config{})
		for n := range int64(8) {
			j.Judge(blockOf(s, 100+15*n, func(i int, f *measure.Feature) float64 {
				for k, name := range patternNames {
					if sd := synthSD[name]; f.Subject == "t1.he" && f.Name == name {
						return 4 * patternOf(leakTable[dischargePath], 2.5)[k] / (sd[0]/3 + sd[1])
					}
				}
				if area == 0 && f.Subject == "t1.he.discharge" && (f.Name == "leak_noise_db" || f.Name == "leak_shape") {
					return 12 // nor does noise
				}
				if f.Subject == "t1.he.discharge" && f.Name == "leak_area_mm2" || f.Subject == "t1.he.discharge" && f.Name == "leak_percent" {
					return area
				}
				return 0
			}))
		}
		said := false
		for _, f := range j.Findings() {
			said = said || f.Subject == "t1.he.discharge" && f.Kind == Leaking
		}
		if said != (area > 0) {
			t.Errorf("area %g spreads: findings %+v", area, j.Findings())
		}
	}
}
