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
	loose  [4]float64 // fluttering, per group
	knock  [4]bool    // the opening's impact lies where the crosshead may knock
	gain   float64    // everything louder or softer alike
	shift  float64    // by how much, ln
}

// pairOf tells which of the acoustic pairs a path belongs to. HE suction and CE discharge blow at nearly the same
// angles, and so do HE discharge and CE suction (reference/vibration.md section 3): vibration names the pair.
var pairOf = [5]int{0, 1, 1, 0, 2}

// partner is the other path of the pair.
func partner(h int) int { return 3 - h }

// With one end idle the rings blow like the loaded end's suction: ringsApart tells whether they are a path of their own.
func listen(p *place, l measure.Layout, dev []*duty.Deviation, settled, ringsApart bool) heard {
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
		if d == nil || h == hRings && !ringsApart {
			continue
		}
		out.noiseZ[h] = d.Z / widen
		noise = append(noise, d.Residual*scale(l, pp.noise))
		sc := d.Residual
		if shapes {
			sc = at(dev, pp.shape).Residual // one scale for all paths: the largest names the path, not the most significant
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

// impacts judges the opening impacts and their moment; closings support only, they are hardly predictable.
func (o *heard) impacts(p *place, dev []*duty.Deviation, widen float64, noise []float64) {
	var shift []float64
	var late [4]float64
	for h := range 4 {
		e, g := h/2, h%2
		o.hard[h] = math.NaN()
		open, shut := p.ends[e].struck(g, dev), at(dev, p.ends[e].impact[g][1])
		hits := at(dev, p.ends[e].hits[g])
		if open != nil {
			shift = append(shift, open.Residual)
			o.hard[h] = llr(open.Z / widen)
			// Healthy blocks reach 0.23; 0.35 and three spreads is the rule of vibration.md section 4.
			if open.Residual < 0.35 {
				o.hard[h] = math.Min(0, o.hard[h])
			} else if open.Z/widen > 3 {
				o.hard[h] = math.Max(advisoryClass, o.hard[h])
			}
			if shut != nil {
				o.hard[h] += 0.3 * math.Max(0, llr(shut.Z/widen))
			}
			if hits != nil && open.Residual >= 0.35 { // a broken plate rattles
				o.hard[h] += 0.3 * math.Max(0, llr(hits.Z/widen))
			}
			o.hard[h] = capped(o.hard[h])
		} else if shut != nil {
			o.hard[h] = math.Max(capLo, math.Min(1, llr(shut.Z/widen)))
		}
		o.late[h] = math.NaN()
		late[h] = sticking(&p.ends[e], g, dev) / widen
		if z := late[h]; !math.IsNaN(z) {
			o.late[h] = capped(llr(z))
			if open == nil || open.Z < 1 { // a sticking valve tears open harder: without that it is half a witness
				o.late[h] = math.Min(advisoryClass, o.late[h])
			}
			if z > 3 && !math.IsNaN(o.hard[h]) {
				o.hard[h] = math.Min(1, o.hard[h])
			}
		}
	}
	for g := range groupName { // both ends of a cylinder late alike is a wrong duty, not two valves sticking
		a, b := sticking(&p.ends[0], g, dev)/widen, sticking(&p.ends[1], g, dev)/widen
		if math.Min(a, b) > 1.5 && math.Max(a, b) < 2.5*math.Min(a, b) {
			o.late[g], o.late[2+g] = math.Min(0, o.late[g]), math.Min(0, o.late[2+g])
		}
	}
	o.flutter(p, dev, late, widen)
	o.common(dev, p, shift, noise, widen)
}

// flutter: after an opening that is no harder than usual the plate strikes again and again; a late impact goes with it
// but may be late by 8 % only (vibration.md section 4). Its neighbours' search for hits hears it too: it is booked where
// the hits are most, and elsewhere only where the impact is late as well. Hits are loud in the leak band, so while a
// plate flutters noise accuses no path.
func (o *heard) flutter(p *place, dev []*duty.Deviation, late [4]float64, widen float64) {
	var hits [4]*duty.Deviation
	most := -1
	for h := range hits {
		hits[h] = at(dev, p.ends[h/2].hits[h%2])
		if hits[h] != nil && (most < 0 || hits[h].Residual > hits[most].Residual) {
			most = h
		}
	}
	flutters := false
	for h, d := range hits {
		o.loose[h] = math.NaN()
		open := p.ends[h/2].struck(h%2, dev)
		if d == nil || open == nil {
			continue
		}
		o.loose[h] = capped(llr(d.Z / widen))
		if open.Residual >= 0.35 || late[h] < -1 || h != most && !(late[h] > 3) {
			o.loose[h] = math.Min(0, o.loose[h])
		}
		if o.loose[h] >= advisoryClass { // what it explains is not sticking as well
			o.late[h] = math.Min(0, o.late[h])
			flutters = true
		}
	}
	for h := range o.leak {
		if flutters {
			o.leak[h] = math.Min(0, o.leak[h])
		}
	}
}

// Around a change of sign of the pin load the crosshead may knock: there a hard impact may be either. In degrees, and
// in ms after it.
const (
	knockDeg = 2.5
	knockMs  = 2.0
)

// knocks tells which openings' impacts lie there.
func (o *heard) knocks(p *place, dev []*duty.Deviation, rpm float64) {
	for h := range o.knock {
		hit := at(dev, p.ends[h/2].onset[h%2])
		for _, k := range p.pin {
			if pin := at(dev, k); hit != nil && pin != nil {
				after := hit.Value - pin.Value
				after -= 360 * math.Round(after/360)
				o.knock[h] = o.knock[h] || after > -knockDeg && after < knockDeg+knockMs*6*rpm/1000
			}
		}
	}
}

// common judges what all impacts and all noise levels of an accelerometer share: that is the sensor's, not the valves'.
func (o *heard) common(dev []*duty.Deviation, p *place, shift, noise []float64, widen float64) {
	if len(shift) < 2 || len(noise) < 3 {
		return
	}
	slices.Sort(shift)
	slices.Sort(noise)
	m, n := shift[len(shift)/2], noise[len(noise)/2]
	alike := shift[0]*shift[len(shift)-1] > 0 && math.Min(math.Abs(shift[0]), math.Abs(shift[len(shift)-1])) > 0.2 &&
		noise[len(noise)-1]-noise[0] < 2.5 && n*m > 0 && math.Abs(n) > 1.5
	if alike { // no valve is accused of what they all do
		for h := range 4 {
			o.leak[h] = math.Min(0, o.leak[h])
			open := p.ends[h/2].struck(h%2, dev)
			if open != nil && open.Residual-m < 0.35 {
				o.hard[h] = math.Min(0, o.hard[h])
			}
		}
		o.leak[hRings] = math.Min(0, o.leak[hRings])
	}
	if len(shift) < 3 { // too few to tell a sensor by: as it was
		return
	}
	o.shift, o.gain = m, capLo
	if alike && math.Abs(m) > 0.35 { // vibration.md section 5: the healthy ten-turn maximum is 0.20
		o.gain = capped(math.Max(advisoryClass, llr(math.Abs(m)/0.10/widen)))
	}
}

// sticking is how much later the opening's impact comes than the crossing of the plateau says, in spreads; the larger
// of that and of the lag after the departure. A leak moves crossing and impact together and cancels. NaN: not known.
func sticking(ep *endPlace, g int, dev []*duty.Deviation) float64 {
	z := math.NaN()
	if d := at(dev, ep.lag[g]); d != nil {
		z = d.Z
	}
	if x := beyondCrossing(dev, ep.onset[g], ep.late[g]); !math.IsNaN(x) && !(x < z) {
		z = x
	}
	return z
}

// beyondCrossing is the deviation of an angle less that of the plateau's crossing, in spreads. NaN: not known.
func beyondCrossing(dev []*duty.Deviation, angle, crossing int) float64 {
	a, c := at(dev, angle), at(dev, crossing)
	if a == nil || c == nil {
		return math.NaN()
	}
	return (a.Residual - c.Residual) / math.Hypot(a.Spread, c.Spread)
}
