package measure_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"lapwing/internal/dsp"
	"lapwing/internal/measure"
	"lapwing/internal/model"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

// swinging moves ratio, speed and suction every other second.
func swinging(seed uint64, seconds float64) windowtest.Run {
	run := windowtest.Run{Ratio: 2.5, RPM: 800, Seconds: seconds, Seed: 1}
	r := rand.New(rand.NewPCG(seed, 9))
	for at := 1.5; at < seconds; at += 1.8 {
		ps := 20e5 * (0.9 + 0.2*r.Float64())
		run.Changes = append(run.Changes,
			model.Change{At: at, Over: .3, What: model.SuctionPressure, Where: "1", To: ps},
			model.Change{At: at, Over: .3, What: model.DischargePressure, Where: "1", To: ps * (1.6 + 2*r.Float64())},
			model.Change{At: at, Over: .3, What: model.Speed, To: 500 + 500*r.Float64()})
	}
	return run
}

// Openings that stand alone, while the load swings: how their onset scatters about the model's own impact, in degrees,
// and how far the 15-turn medians of the normalised impact stray, against those of the plain one. The targets are 0.1°
// and 0.25 ln; vibration.md section 1 had 0.02 to 0.07° with one valve at 0.38°, and 0.04 to 0.25 ln, on another model.
func TestOpeningsUnderLoadSwings(t *testing.T) {
	subjects := []string{"t1.he.suction.opens", "t1.he.discharge.opens", "t1.ce.suction.opens", "t1.ce.discharge.opens"}
	var late, plain, norm [4][]float64
	perDeg := [4][]float64{}
	seconds, least := 5.4, 30
	if *sweep {
		seconds, least = 120, 500
	}
	each(t, swinging(11, seconds), func(_ int64, tn windowtest.Turn, w window.Result, v *measure.Vector, l measure.Layout) {
		for i, s := range subjects {
			e, k := i/2, []window.Event{window.SuctionOpens, window.DischargeOpens}[i%2]
			truth := tn.Truth[0][e].Suction.Open
			if i%2 == 1 {
				truth = tn.Truth[0][e].Discharge.Open
			}
			onset, a, b := v.V[l.Find(s, "onset_deg")], v.V[l.Find(s, "impact_ln")], v.V[l.Find(s, "impact_norm_ln")]
			if v.Marks[0][e][k].Sharing != measure.Alone || math.IsNaN(onset) {
				continue
			}
			if tn.Truth[0][e].Rev >= 0 {
				late[i] = append(late[i], (onset-truth.Impact)/(6*v.RPM/1000)) // ms: the way to the sensor takes its time
				perDeg[i] = append(perDeg[i], 6*v.RPM/1000)
			}
			if !math.IsNaN(b) {
				plain[i], norm[i] = append(plain[i], a), append(norm[i], b)
			}
		}
	})
	worst := func(x []float64) (w float64) {
		m := dsp.Median(x)
		for i := 0; i+15 <= len(x); i += 15 {
			w = max(w, math.Abs(dsp.Median(slices.Clone(x[i:i+15]))-m))
		}
		return w
	}
	for i, s := range subjects {
		if len(late[i]) < least || len(norm[i]) < least {
			t.Fatalf("%s: only %d onsets and %d impacts", s, len(late[i]), len(norm[i]))
		}
		m := dsp.Median(slices.Clone(late[i]))
		sq, far := 0.0, 0
		for j, x := range late[i] {
			d := (x - m) * perDeg[i][j]
			sq += d * d
			if math.Abs(d) > 1 {
				far++
			}
		}
		rms := math.Sqrt(sq / float64(len(late[i])))
		t.Logf("%-22s %4d turns: onset %.3f ms after the model's impact, scatter %.3f° rms, %d beyond 1°; worst 15-turn median: impact %.2f ln, normalised %.2f ln",
			s, len(late[i]), m, rms, far, worst(plain[i]), worst(norm[i]))
		if rms > 0.1 {
			t.Errorf("%s: onset scatters by %.3f°", s, rms)
		}
		if w := worst(norm[i]); w > 0.25 {
			t.Errorf("%s: a 15-turn median of the normalised impact is %.2f ln off", s, w)
		}
	}
}

// A leak of 1 % of an end's delivery is heard in its dwell: at least 2 dB, whatever the valve's coupling (the model draws
// it between 0.7 and 1.3 of the usual). vibration.md section 3 has 3.0 to 3.9 dB on another model; the model's hiss was
// set by those figures, so the mean is no check, but the least and the weights are.
// onePercent are the holes in mm² of head-end suction, discharge, crank-end suction, discharge that cost 1 %.
var onePercent = [4]float64{2.79, 1.58, 2.30, 1.52}

func TestOnePercentLeakIsHeard(t *testing.T) {
	healthy := measured(t, base())
	paths := []struct{ valve, subject string }{{"t1.he.s1", "t1.he.suction"}, {"t1.he.d1", "t1.he.discharge"}, {"t1.ce.s1", "t1.ce.suction"}, {"t1.ce.d1", "t1.ce.discharge"}}
	least, rounds := 2.0, 1
	if *sweep {
		rounds = 2
	}
	for i, p := range paths {
		if !*sweep && (i == 1 || i == 2) { // the loudest and the quietest will do
			continue
		}
		// Size the hole so that 1 % of what the end delivers goes through it.
		area, leaked, delivered := onePercent[i]*model.MM2, 0.0, 0.0
		var out *outcome
		hole := 0.0
		for range rounds {
			r := base()
			r.Changes = []model.Change{{What: model.ValveLeak, Where: p.valve, To: area}}
			out = measured(t, r)
			leaked, delivered = 0, 0
			for k, tr := range out.truth {
				if tr.Rev < 0 || tr.End != i/2 {
					continue
				}
				if i%2 == 0 {
					leaked += tr.Leaked.Suction - healthy.truth[k].Leaked.Suction
				} else {
					leaked += tr.Leaked.Discharge - healthy.truth[k].Leaked.Discharge
				}
				delivered += healthy.truth[k].Delivered
			}
			hole, area = area, area*0.01*delivered/leaked
		}
		rise := out.get(t, p.subject, "leak_noise_db") - healthy.get(t, p.subject, "leak_noise_db")
		t.Logf("%s: %.2f mm² more, %.2f %% lost, dwell noise %+.1f dB", p.subject, hole/model.MM2, 100*leaked/delivered, rise)
		if rise < least || math.Abs(100*leaked/delivered-1) > .1 {
			t.Errorf("%s: %.2f %% lost raises the noise by %.1f dB", p.subject, 100*leaked/delivered, rise)
		}
	}
}

// The same while the load swings: the same script with and without the leak, turn by turn. What is 1 % at the base duty is
// less or more of what an end delivers at others; that share is logged.
func TestOnePercentLeakIsHeardWhileTheLoadSwings(t *testing.T) {
	if !*sweep {
		t.Skip("long: -args -sweep; at one duty TestOnePercentLeakIsHeard runs always")
	}
	const seconds = 30
	paths := []struct{ valve, subject string }{{"t1.he.s1", "t1.he.suction"}, {"t1.he.d1", "t1.he.discharge"}, {"t1.ce.s1", "t1.ce.suction"}, {"t1.ce.d1", "t1.ce.discharge"}}
	type heard struct{ noise, leaked, delivered float64 }
	listen := func(i int, area float64) map[int64]heard {
		run := swinging(11, seconds)
		if area > 0 {
			run.Changes = append(run.Changes, model.Change{What: model.ValveLeak, Where: paths[i].valve, To: area})
		}
		out := map[int64]heard{}
		each(t, run, func(n int64, tn windowtest.Turn, _ window.Result, v *measure.Vector, l measure.Layout) {
			tr := &tn.Truth[0][i/2]
			h := heard{noise: v.V[l.Find(paths[i].subject, "leak_noise_db")], leaked: tr.Leaked.Suction, delivered: tr.Delivered}
			if i%2 == 1 {
				h.leaked = tr.Leaked.Discharge
			}
			if tr.Rev >= 0 && !math.IsNaN(h.noise) {
				out[n] = h
			}
		})
		return out
	}
	for i, p := range paths {
		healthy, leaky := listen(i, 0), listen(i, onePercent[i]*model.MM2)
		var rise, share []float64
		for n, h := range healthy {
			if x, ok := leaky[n]; ok {
				rise, share = append(rise, x.noise-h.noise), append(share, 100*(x.leaked-h.leaked)/h.delivered)
			}
		}
		if len(rise) < 150 {
			t.Fatalf("%s: %d turns", p.subject, len(rise))
		}
		m := dsp.Median(rise)
		t.Logf("%s: %d turns, %.2f %% lost in the median, dwell noise %+.1f dB in the median", p.subject, len(rise), dsp.Median(share), m)
		if m < 2 {
			t.Errorf("%s: the noise rises by %.1f dB in the median", p.subject, m)
		}
	}
}
