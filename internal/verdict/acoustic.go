package verdict

import (
	"math"
	"slices"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// heard is what vibration says in one block.
type heard struct {
	leak   [5]float64 // log-likelihood ratio per path in the order of the hypotheses; NaN where absent
	noiseZ [5]float64 // spreads above the usual level
	best   int        // which pair or the rings stand out: 0 {HE s, CE d}, 1 {HE d, CE s}, 2 rings; -1 none
	hard   [4]float64 // impacting hard, per group; NaN where absent
	late   [4]float64 // opening late after its pressure, per group
	gain   float64    // everything louder or softer alike
	shift  float64    // by how much, ln
}

// pairOf tells which of the acoustic pairs a path belongs to. HE suction and CE discharge blow at nearly the same
// angles, and so do HE discharge and CE suction (reference/vibration.md section 3): vibration names the pair.
var pairOf = [5]int{0, 1, 1, 0, 2}

// partner is the other path of the pair.
func partner(h int) int { return 3 - h }

func listen(p *place, l measure.Layout, dev []*duty.Deviation, settled bool) heard {
	widen := 1.0
	if !settled {
		widen = 1.5
	}
	out := heard{best: -1, gain: math.NaN()}
	paths := [5]pathPlace{p.ends[0].path[0], p.ends[0].path[1], p.ends[1].path[0], p.ends[1].path[1], p.rings}
	var score [3]float64
	var any [3]bool
	var noise []float64
	shapes := true
	for _, pp := range paths {
		if at(dev, pp.noise) != nil && at(dev, pp.shape) == nil {
			shapes = false
		}
	}
	for h, pp := range paths {
		out.leak[h], out.noiseZ[h] = math.NaN(), math.NaN()
		d := at(dev, pp.noise)
		if d == nil {
			continue
		}
		out.noiseZ[h] = d.Z / widen
		noise = append(noise, d.Residual*scale(l, pp.noise))
		sc := d.Residual
		if shapes {
			sc = at(dev, pp.shape).Z
		}
		if k := pairOf[h]; !any[k] || sc > score[k] {
			any[k], score[k] = true, sc
		}
	}
	for k := range score {
		if any[k] && (out.best < 0 || score[k] > score[out.best]) {
			out.best = k
		}
	}
	for h := range paths {
		if math.IsNaN(out.noiseZ[h]) {
			continue
		}
		z := out.noiseZ[h]
		if h < hRings {
			if q := out.noiseZ[partner(h)]; !math.IsNaN(q) {
				z = math.Max(z, q) // the pair is heard, not the member
			}
		}
		out.leak[h] = capped(llr(z))
		if pairOf[h] != out.best { // louder elsewhere: a leak raises every level somewhat
			out.leak[h] = math.Min(0, out.leak[h])
		}
	}
	out.impacts(p, dev, widen, noise)
	return out
}

// impacts judges the opening impacts and their lag; closings support only, they are hardly predictable.
func (o *heard) impacts(p *place, dev []*duty.Deviation, widen float64, noise []float64) {
	var shift []float64
	for h := range 4 {
		e, g := h/2, h%2
		o.hard[h], o.late[h] = math.NaN(), math.NaN()
		open, shut, lag := at(dev, p.ends[e].impact[g][0]), at(dev, p.ends[e].impact[g][1]), at(dev, p.ends[e].lag[g])
		if open != nil {
			shift = append(shift, open.Residual)
			o.hard[h] = llr(open.Z / widen)
			if open.Residual < 0.35 { // healthy blocks reach 0.23 (vibration.md section 4)
				o.hard[h] = math.Min(0, o.hard[h])
			}
			if shut != nil {
				o.hard[h] += 0.3 * math.Max(0, llr(shut.Z/widen))
			}
			o.hard[h] = capped(o.hard[h])
		} else if shut != nil {
			o.hard[h] = math.Max(capLo, math.Min(1, llr(shut.Z/widen)))
		}
		if lag != nil {
			o.late[h] = capped(llr(lag.Z / widen))
			if open == nil || open.Z < 1 { // sticking tears open: later and harder (vibration.md section 4)
				o.late[h] = math.Min(2, o.late[h])
			} else if lag.Z > 3 && !math.IsNaN(o.hard[h]) {
				o.hard[h] = math.Min(1, o.hard[h])
			}
		}
	}
	if len(shift) < 3 || len(noise) < 3 {
		return
	}
	slices.Sort(shift)
	slices.Sort(noise)
	m, n := shift[len(shift)/2], noise[len(noise)/2]
	o.shift = m
	alike := shift[0]*shift[len(shift)-1] > 0 && math.Min(math.Abs(shift[0]), math.Abs(shift[len(shift)-1])) > 0.2 &&
		noise[len(noise)-1]-noise[0] < 2.5 && n*m > 0 && math.Abs(n) > 1.5
	if alike && math.Abs(m) > 0.35 { // vibration.md section 5: the healthy ten-turn maximum is 0.20
		o.gain = capped(llr(math.Abs(m) / 0.10 / widen))
	} else {
		o.gain = capLo
	}
}
