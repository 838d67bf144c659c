package verdict

import (
	"math"
	"slices"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// heard is what vibration says in one block.
type heard struct {
	leak   [5]vote    // per path in the order of the hypotheses
	noiseZ [5]float64 // spreads above the usual level
	best   int        // which pair or the rings stand out: 0 {HE s, CE d}, 1 {HE d, CE s}, 2 rings; -1 none
	hard   [4]vote    // impacting hard, per group
	late   [4]vote    // opening late after its pressure, per group
	loose  [4]vote    // fluttering, per group
	knock  [4]bool    // the opening's impact lies where the crosshead may knock
	near   [4]bool    // its partner opens within a few ms of it
	either [4]bool    // what was heard of its opening may be its partner's: the windows are one
	gain   vote       // everything louder or softer alike
	shift  float64    // by how much, ln
}

// pairOf tells which of the acoustic pairs a path belongs to. HE suction and CE discharge blow at nearly the same
// angles, and so do HE discharge and CE suction (reference/vibration.md section 3): vibration names the pair.
var pairOf = [5]int{0, 1, 1, 0, 2}

// partner is the other path of the pair.
func partner(h int) int { return 3 - h }

// With one end idle the rings blow like the loaded end's suction: ringsApart tells whether they are a path of their own.
func listen(p *place, l measure.Layout, dev []*duty.Deviation, settled, ringsApart bool, rpm float64) heard {
	widen := 1.0
	if !settled {
		widen = 1.5
	}
	out := heard{best: -1, gain: silent}
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
		out.leak[h], out.noiseZ[h] = silent, math.NaN()
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
		out.leak[h] = votes(z)
		if pairOf[h] != out.best { // a leak raises every level somewhat
			out.leak[h].most(0, "the noise stands out more at the angles of another path")
		}
	}
	out.impacts(p, dev, widen, noise, rpm)
	return out
}

// impacts judges the opening impacts and their moment; closings support only, they are hardly predictable.
func (o *heard) impacts(p *place, dev []*duty.Deviation, widen float64, noise []float64, rpm float64) {
	var shift []float64
	var late [4]float64
	for h := range 4 {
		e, g := h/2, h%2
		o.hard[h] = silent
		open, shut := p.ends[e].struck(g, dev), at(dev, p.ends[e].impact[g][1])
		hits := at(dev, p.ends[e].hits[g])
		if open != nil {
			shift = append(shift, open.Residual)
			z := open.Z / widen
			o.hard[h] = vote{llr: llr(z), raw: llr(z)}
			// Healthy blocks reach 0.23; 0.35 and three spreads is the rule of vibration.md section 4. With late closing on
			// both ends healthy blocks came to 0.36 and 3.4 spreads (TestSoakHealthy): three spreads do from 0.5 on.
			if open.Residual < hardLn {
				o.hard[h].most(0, "the opening is less than 1.42 times as hard as usual")
			} else if z > 3 && open.Residual >= hardForSure {
				o.hard[h].least(advisoryClass)
			}
			if shut != nil {
				o.hard[h].llr += 0.3 * math.Max(0, llr(shut.Z/widen))
			}
			if hits != nil && open.Residual >= hardLn { // a broken plate rattles
				o.hard[h].llr += 0.3 * math.Max(0, llr(hits.Z/widen))
			}
			o.hard[h].llr = capped(o.hard[h].llr)
		} else if r, z := louder(at(dev, p.ends[e].peak[g])); r >= hardShared && z/widen > 5 {
			o.hard[h], o.either[h] = votes(z/widen), true
			o.hard[h].least(advisoryClass)
			o.hard[h].most(advisoryClass, "heard in a window that two openings share")
		} else if shut != nil {
			o.hard[h] = votes(shut.Z / widen)
			o.hard[h].most(1, "only the closing was heard")
		}
		o.late[h] = silent
		late[h] = sticking(&p.ends[e], g, dev) / widen
		if z := late[h]; !math.IsNaN(z) {
			o.late[h] = votes(z)
			if open == nil || open.Z < 1 { // a sticking valve tears open harder: without that it is half a witness
				o.late[h].most(advisoryClass, "late, but no harder than usual")
			}
			if z > 3 {
				o.hard[h].most(1, "the opening is late: a sticking valve tears open harder")
			}
		}
	}
	for g := range groupName { // both ends of a cylinder late alike is a wrong duty, not two valves sticking
		a, b := sticking(&p.ends[0], g, dev)/widen, sticking(&p.ends[1], g, dev)/widen
		if math.Min(a, b) > 1.5 && math.Max(a, b) < 2.5*math.Min(a, b) {
			o.late[g].most(0, "both ends are late alike: a wrong duty, not two valves")
			o.late[2+g].most(0, "both ends are late alike: a wrong duty, not two valves")
		}
	}
	o.beside(p, dev, rpm)
	o.flutter(p, dev, late, widen)
	o.common(dev, p, shift, noise, widen)
}

// hardLn is the least rise of an opening's impact, ln, that is called hard.
const hardLn = 0.35

// hardForSure is the rise that three spreads are enough for.
const hardForSure = 0.5

// hardShared is the same for the peak of a window that two openings share: with no fault at all it reached 0.5 where the
// two move through each other (station's TestSoakFaults, head ends late).
const hardShared = 0.7

// louder gives the rise of a peak, ln, and its spreads.
func louder(d *duty.Deviation) (ln, z float64) {
	if d == nil || !(d.Expected > 0 && d.Value > 0) {
		return 0, 0
	}
	return math.Log(d.Value / d.Expected), d.Z
}

// Two openings within ringMs of each other ring into one another, even where they were told apart: of two that are hard
// the one that is harder by muchHarder (ln) explains the other.
const (
	ringMs     = 5.0
	muchHarder = 0.3
)

// beside judges what openings that act close together make of each other.
func (o *heard) beside(p *place, dev []*duty.Deviation, rpm float64) {
	var rise, angle [4]float64
	for h := range rise {
		rise[h], angle[h] = math.NaN(), math.NaN()
		ep := &p.ends[h/2]
		if d := ep.struck(h%2, dev); d != nil {
			rise[h] = d.Residual
		} else if o.either[h] {
			rise[h], _ = louder(at(dev, ep.peak[h%2]))
		}
		if d := at(dev, ep.onset[h%2]); d != nil {
			angle[h] = d.Value
		} else if d := at(dev, ep.open[h%2]); d != nil {
			angle[h] = d.Value
		}
	}
	for h := range rise {
		for q := range rise {
			if q == h || math.IsNaN(rise[h]) || math.IsNaN(rise[q]) {
				continue
			}
			gap := angle[h] - angle[q]
			gap -= 360 * math.Round(gap/360)
			if math.Abs(gap) < ringMs*6*rpm/1000 && rise[h] >= hardLn && rise[q] > rise[h]+muchHarder {
				o.hard[h].most(0, "a harder blow beside it rings into this one: "+p.path(q))
			}
		}
		gap := angle[h] - angle[partner(h)]
		gap -= 360 * math.Round(gap/360)
		o.near[h] = math.Abs(gap) < ringMs*6*rpm/1000
		if q := partner(h); o.either[h] && p.ends[q/2].struck(q%2, dev) != nil { // the other was heard for itself
			if o.either[h] = false; rise[q] >= hardLn {
				o.hard[h].most(0, "the blow is that of "+p.path(q)+" in the same window")
			}
		}
	}
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
		o.loose[h] = silent
		open := p.ends[h/2].struck(h%2, dev)
		if d == nil || open == nil {
			continue
		}
		o.loose[h] = votes(d.Z / widen)
		switch {
		case open.Residual >= hardLn:
			o.loose[h].most(0, "the opening itself is harder than usual")
		case late[h] < -1:
			o.loose[h].most(0, "the impact comes sooner than usual")
		case h != most && !(late[h] > 3):
			o.loose[h].most(0, "another group has more extra hits")
		}
		// Its partner's plate, opening close by, would be heard here.
		if q := partner(h); o.loose[h].llr > 0 && p.ends[q/2].works && (o.near[h] || hits[q] == nil || hits[q].Residual > 0.5*d.Residual) {
			o.either[h] = true
		}
		if o.loose[h].llr >= advisoryClass { // what it explains is not sticking as well
			o.late[h].most(0, "a plate that flutters strikes late as well")
			flutters = true
		}
	}
	for h := range o.leak {
		if flutters {
			o.leak[h].most(0, "a fluttering plate is loud in the leak band")
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

const asOne = "all impacts and noise levels have moved alike: that is the accelerometer"

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
			o.leak[h].most(0, asOne)
			open := p.ends[h/2].struck(h%2, dev)
			if open != nil && open.Residual-m < 0.35 {
				o.hard[h].most(0, asOne)
			}
		}
		o.leak[hRings].most(0, asOne)
	}
	if len(shift) < 3 { // too few to tell a sensor by: as it was
		return
	}
	raw := llr(math.Abs(m) / 0.10 / widen)
	o.shift, o.gain = m, vote{llr: capLo, raw: raw, why: "impacts and noise have not moved alike by a third"}
	if alike && math.Abs(m) > 0.35 { // vibration.md section 5: the healthy ten-turn maximum is 0.20
		o.gain = vote{llr: capped(math.Max(advisoryClass, raw)), raw: raw}
	}
}

// sticking is how much later the opening's impact comes than the crossing of the plateau says, in spreads; the larger
// of that and of the lag after the departure. A leak moves crossing and impact together and cancels. An impact that is
// where it always was is not late, wherever the pressures put the crossing. NaN: not known.
func sticking(ep *endPlace, g int, dev []*duty.Deviation) float64 {
	z := math.NaN()
	if d := at(dev, ep.lag[g]); d != nil {
		z = d.Z
	}
	x := beyondCrossing(dev, ep.onset[g], ep.late[g])
	if x > 1 {
		x = math.Max(1, math.Min(x, 2*at(dev, ep.onset[g]).Z))
	}
	if !math.IsNaN(x) && !(x < z) {
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
