package station

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"

	source "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/window"
)

// reading is what one measure of one throw said, block by block, in spreads.
type reading struct {
	name    string
	z       []float64
	settled []bool
}

// walkBlocks plays a script and keeps what every evidence block says against a baseline.
func walkBlocks(t testing.TB, sk *skid.Skid, s model.Script, seed uint64, seconds float64, base *duty.Baseline, mem *window.Memory) (out []reading, states map[string]int) {
	t.Helper()
	src, err := source.Open(sk, s, source.Options{Seed: seed, Duration: time.Duration(seconds * float64(time.Second)), Start: time.Date(2026, 5, 4, 6, 0, 0, 0, time.UTC), BlockLen: 4096})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	p := &player{src: src, rows: newHeld()}
	if p.line, err = NewLine(sk, src.Info(), p.rows.at, LearnPlan{}, base, alarm.New(AlarmTiming(sk))); err != nil {
		t.Fatal(err)
	}
	if err := p.line.Remember(Memory{Windows: *mem}); err != nil {
		t.Fatal(err)
	}
	layout := p.line.Layout()
	out, states = make([]reading, len(layout)), map[string]int{}
	for i, f := range layout {
		out[i].name = f.Name
		if strings.HasSuffix(f.Subject, ".closes") {
			out[i].name += " of closings"
		}
	}
	blocks := duty.NewBlocks(p.line.ref, duty.BlockConfig{Turns: sk.Detection.BlockTurns})
	var devs []duty.Deviation
	p.until(t, func(o *Output) bool {
		if !o.Record.Valid {
			return false
		}
		for i, pt := range o.Points {
			states[pt.State.String()]++
			devs = p.line.ref.Deviate(devs[:0], i, pt, o.Vector)
			if b, ok := blocks.Add(i, pt, o.Vector, devs); ok {
				for _, d := range b.Dev {
					out[d.Feature].z = append(out[d.Feature].z, d.Z)
					out[d.Feature].settled = append(out[d.Feature].settled, b.Settled)
				}
			}
		}
		return false
	})
	return out, states
}

// holds is an ordinary day in short: each duty is held for so many seconds.
func holds(s model.Script, at, until, each float64, seed uint64) model.Script {
	r := rand.New(rand.NewPCG(seed, 78))
	in := func(lo, hi float64) float64 { return lo + (hi-lo)*r.Float64() }
	rpm := s.RPM
	for k := 0; at < until; k++ {
		a := fieldDuty{ratio: in(1.8, 3.6), rpm: in(505, 995), ps: in(7.1, 8.9), step: k % 3}
		over := max(2, ramp(rpm, a.rpm))
		s, rpm = a.set(s, at, over), a.rpm
		at += over + each
	}
	return s
}

// lag is the correlation of neighbouring values.
func lag(z []float64) float64 {
	m, num, den := 0.0, 0.0, 0.0
	for _, v := range z {
		m += v / float64(len(z))
	}
	for i, v := range z {
		den += (v - m) * (v - m)
		if i > 0 {
			num += (v - m) * (z[i-1] - m)
		}
	}
	return num / den
}

// Healthy machines: how often the slow test and the sudden one signal, over every measure of every throw.
func TestFieldRunLength(t *testing.T) {
	longOnly(t)
	sk := fieldSkid(t)
	for seed := uint64(1); seed <= 2; seed++ {
		l := learnField(t, sk, nil, seed)
		for _, walk := range []struct {
			name    string
			script  model.Script
			seconds float64
		}{
			{"restless", wander(begin(sk, middle), 4, 240, 40+seed, []int{1, 2, 0}), 240},
			{"duties of half a minute", holds(begin(sk, middle), 20, 360, 30, 50+seed), 360},
		} {
			all, states := walkBlocks(t, sk, walk.script, seed, walk.seconds, l.learnt, &l.windows)
			t.Logf("seed %d, %s: turns by state %v", seed, walk.name, states)
			var bear []reading
			for _, r := range all {
				if bears(r.name) {
					bear = append(bear, r)
				}
			}
			for _, only := range []bool{false, true} {
				report(t, "all measures", all, only)
				report(t, "those that findings stand on", bear, only)
			}
		}
	}
}

// bears tells whether a leak, a late opening or a hard impact is found by a measure.
func bears(name string) bool {
	for _, p := range []string{"leak_percent", "leak_area_mm2", "leak_noise_db", "leak_shape", "n_comp_", "n_exp_", "mass_", "suction_opens_late_deg", "discharge_opens_late_deg", "ve_", "flow_balance", "impact_norm_ln", "extra_hits_45", "cover_above"} {
		if strings.HasPrefix(name, p) {
			return true
		}
	}
	return false
}

func report(t *testing.T, what string, all []reading, settled bool) {
	var lags, later, steps []float64
	sq := 0.0
	n, wild := 0, [3]int{}
	signals, names := map[float64]int{}, map[string]int{}
	for i := range all {
		var z []float64
		for k, v := range all[i].z {
			if !settled || all[i].settled[k] {
				z = append(z, v)
			}
		}
		n += len(z)
		for _, v := range z {
			for k, limit := range []float64{3, 4, 5} {
				if math.Abs(v) > limit {
					wild[k]++
				}
			}
		}
		if len(eights(z)) > 10 {
			lags = append(lags, lag(z))
			later = append(later, lag(eights(z)))
		}
		for _, v := range z {
			sq += v * v
		}
		steps = append(steps, eights(z)...)
		for _, limit := range []float64{2, 4, 6, duty.CusumLimit} {
			var c duty.Cusum
			for _, v := range eights(z) {
				if math.Abs(c.Step(v))*duty.CusumLimit >= limit {
					signals[limit]++
					c = duty.Cusum{}
					if limit == duty.CusumLimit {
						names[all[i].name]++
					}
				}
			}
		}
	}
	t.Logf("  %s, settled only %v: %d values of %d measures, rms %.2f, lag-1 median %.2f; beyond 3, 4, 5 spreads: %v; %d steps of the slow test, lag-1 median %.2f, signals at 2, 4, 6, 8: %d %d %d %d %s", what, settled, n, len(all),
		math.Sqrt(sq/float64(n)), quantileOf(lags, 0.5), wild, len(steps), quantileOf(later, 0.5), signals[2], signals[4], signals[6], signals[8], fmt.Sprint(names))
}

// eights gives the medians of eight values at a time, as the slow test takes them.
func eights(z []float64) (out []float64) {
	for ; len(z) >= 8; z = z[8:] {
		few := slices.Sorted(slices.Values(z[:8]))
		out = append(out, (few[3]+few[4])/2)
	}
	return out
}
