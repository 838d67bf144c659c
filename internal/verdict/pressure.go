package verdict

import (
	"math"
	"slices"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// The hypotheses that pressure patterns can speak about, per throw. The first four are leaking groups in the order
// HE suction, HE discharge, CE suction, CE discharge.
const (
	hLeak      = 0
	hRings     = 4
	hDead      = 5
	hZero      = 6 // + end
	hClearance = 8 // + end
	hGas       = 10
	hPressures = 11
)

// rhoWithin is the mean correlation that is assumed between the features of one pattern: they come from the same
// samples. It discounts their joint weight by 1 + (m−1)·rho (reference/vibration.md section 6).
const rhoWithin = 0.3

// rhoArea is the same between the exponents' contrast and the fitted leak area.
const rhoArea = 0.4

// templateError is how far a real machine's pattern may differ from the tables, as a share of the amplitude: what is
// left of a leak after its pattern has been taken out must not become a second finding.
const templateError = 0.35

// fitted is what pressure says about one hypothesis in one block.
type fitted struct {
	judged bool
	chosen bool    // it took the evidence
	first  bool    // it was the first to
	z      float64 // amplitude in spreads, turned so that positive means present
	g, sd  float64 // amplitude in the hypothesis's unit and its spread
	areaZ  float64 // of the leak area, NaN when there is none
	vote
}

// sight is one block laid out for the contrast.
type sight struct {
	y, s2   [2][patternLen]float64 // people's units; s2 = 0 where absent
	n       [2]int                 // features present
	ratio   [2]float64
	areaZ   [5]float64 // HE s, HE d, CE s, CE d, rings; NaN where absent
	pattern [hPressures][2]pattern
	noRings bool // both ends work, and the leak fit had to leave the rings out all the same
}

func look(p *place, l measure.Layout, dev []*duty.Deviation, settled bool) *sight {
	var s sight
	widen := 1.0
	if !settled {
		widen = 1.5 // a turn on the way from one duty to the next is a poorer witness
	}
	r := 0.0
	for e := range p.ends {
		s.ratio[e] = math.NaN()
		if d := at(dev, p.ends[e].ratio); d != nil {
			s.ratio[e], r = d.Expected, d.Expected
		}
		for i, f := range p.ends[e].f {
			if d := at(dev, f); d != nil {
				sc := scale(l, f)
				s.y[e][i] = d.Residual * sc
				s.s2[e][i] = sq(d.Spread * math.Abs(sc) * widen)
				s.n[e]++
			}
		}
	}
	common := alike(p, dev)
	for i, pp := range []pathPlace{p.ends[0].path[0], p.ends[0].path[1], p.ends[1].path[0], p.ends[1].path[1], p.rings} {
		s.areaZ[i] = math.NaN()
		if d := at(dev, pp.percent); d != nil { // its floor fits machines of any size
			z := d.Z
			if i != hRings && common > 0 {
				z = (d.Residual - common) / math.Hypot(d.Spread, alikeError*common)
			}
			s.areaZ[i] = clip(z/widen, 12)
		} else if d := at(dev, pp.area); d != nil {
			s.areaZ[i] = clip(d.Z/widen, 12)
		}
	}
	s.noRings = s.n[0] >= enough && s.n[1] >= enough && p.rings.area >= 0 && math.IsNaN(s.areaZ[hRings]) &&
		!math.IsNaN(s.areaZ[hLeak]) && !math.IsNaN(s.areaZ[hLeak+2])
	for e := range s.ratio {
		if math.IsNaN(s.ratio[e]) {
			s.ratio[e] = r // the other end's; 0 when neither knows
		}
		rr := s.ratio[e]
		if rr == 0 {
			rr = 2.5
		}
		s.pattern[hLeak+2*e+suction][e] = patternOf(leakTable[suctionPath], rr)
		s.pattern[hLeak+2*e+discharge][e] = patternOf(leakTable[dischargePath], rr)
		s.pattern[hRings][e] = patternOf(leakTable[ringsPath], rr)
		s.pattern[hDead][e] = patternOf(earlyTable, rr)
		s.pattern[hZero+e][e] = patternOf(zeroTable, rr)
		s.pattern[hClearance+e][e] = patternOf(clearanceTable, rr)
		s.pattern[hGas][e] = patternOf(gasTable, rr)
	}
	return &s
}

// enough is how many pressure features an end must show before it is judged.
const enough = 4

// candidate tells whether a hypothesis can be judged on this block.
func (s *sight) candidate(h int) bool {
	two := s.n[0] >= enough && s.n[1] >= enough
	switch h {
	case hRings: // with one end idle, rings look like the other end's suction (leaks.md section 2)
		return two
	case hDead:
		return s.n[0] >= enough || s.n[1] >= enough
	case hGas:
		return two
	case hLeak, hLeak + 1, hZero, hClearance:
		return s.n[0] >= enough
	default:
		return s.n[1] >= enough
	}
}

func leak(h int) bool { return h <= hRings }

// fit estimates one hypothesis's amplitude by weighted least squares. gain is the chi-square it explains, share how
// much of the chi-square of the features it speaks about.
func (s *sight) fit(h int) (f fitted, gain, share float64) {
	var num, den, sq4, all float64
	for e := range 2 {
		for i, t := range s.pattern[h][e] {
			if t == 0 || s.s2[e][i] == 0 {
				continue
			}
			w := t * t / s.s2[e][i]
			num += t * s.y[e][i] / s.s2[e][i]
			den += w
			sq4 += w * w
			all += s.y[e][i] * s.y[e][i] / s.s2[e][i]
		}
	}
	f.areaZ = math.NaN()
	if den == 0 {
		return f, 0, 0
	}
	f.judged = true
	f.g = num / den
	f.sd = math.Sqrt((1 + (den*den/sq4-1)*rhoWithin) / den)
	f.z = f.g / f.sd
	gain, share = num*num/den, 0
	if all > 0 {
		share = gain / all
	}
	if !leak(h) {
		f.z = math.Abs(f.z)
		return f, gain, share
	}
	if f.z < 0 {
		gain = 0
	}
	if a := s.areaZ[h]; !math.IsNaN(a) {
		f.areaZ = a
		f.z = both(f.z, a, rhoArea)
		if a > 0 {
			gain += a * a
		}
	}
	return f, gain, share
}

// contrast lets the patterns compete for a block's evidence: up to three in turn, each taking what it explains.
func (s *sight) contrast() (out [hPressures]fitted) {
	var took [hPressures]bool
	for round := range 3 {
		best, most := -1, 0.0
		var pick fitted
		for h := range hPressures {
			if took[h] || !s.candidate(h) {
				continue
			}
			f, gain, share := s.fit(h)
			if f.z < 2 || share < 0.35 {
				continue
			}
			if !leak(h) {
				if share < 0.5 {
					continue
				}
				gain *= 1.05 // when in doubt it is the sensor
			}
			if gain > most {
				best, most, pick = h, gain, f
			}
		}
		if best < 0 {
			break
		}
		took[best] = true
		pick.chosen, pick.first = true, round == 0
		pick.vote = votes(pick.z)
		out[best] = pick
		s.take(best, pick.g)
	}
	for h := range hPressures {
		if took[h] || !s.candidate(h) {
			continue
		}
		f, _, _ := s.fit(h)
		f.vote = votes(f.z)
		if f.judged && f.z < 4 { // not the best explanation and no strong one: no evidence either way
			f.most(0, "other patterns explain these pressures better")
		}
		out[h] = f
	}
	return out
}

// take removes a pattern with its uncertainty.
func (s *sight) take(h int, g float64) {
	for e := range 2 {
		for i, t := range s.pattern[h][e] {
			if s.s2[e][i] == 0 {
				continue
			}
			s.y[e][i] -= g * t
			s.s2[e][i] += sq(templateError * g * t)
		}
	}
	if h == hGas { // another gas reads as four leaks alike (leaks.md section 1): what is common is not theirs
		var a []float64
		for k := range hRings {
			if !math.IsNaN(s.areaZ[k]) {
				a = append(a, s.areaZ[k])
			}
		}
		slices.Sort(a)
		for k := range hRings {
			if len(a) == 4 {
				s.areaZ[k] -= (a[1] + a[2]) / 2
			}
		}
	}
	if leak(h) {
		// The fit's own cross-talk is a few per cent (leaks.md section 1); the path itself is used up.
		a := s.areaZ[h]
		s.areaZ[h] = 0
		for k := range s.areaZ {
			if k != h && a > 0 {
				s.areaZ[k] /= math.Hypot(1, 0.1*a)
			}
		}
	}
}

// structural lists what pressure cannot tell from a leak on this block (reference/leaks.md section 2): with one end
// idle, blind or without a pressure the rings look like the working end's suction; with late closing on both ends they
// look like both; a packing looks like the crank end's suction.
func (s *sight) structural(p *place, end, g int) []string {
	var out []string
	if g != suction {
		return nil
	}
	if s.n[1-end] < enough || s.noRings {
		out = append(out, p.id+".rings")
	}
	if end == crank.CE {
		out = append(out, p.id+".packing")
	}
	return out
}

func at(dev []*duty.Deviation, i int) *duty.Deviation {
	if i < 0 {
		return nil
	}
	return dev[i]
}

func scale(l measure.Layout, i int) float64 {
	if l[i].Scale == 0 {
		return 1
	}
	return l[i].Scale
}

func sq(x float64) float64 { return x * x }

func clip(x, c float64) float64 { return math.Max(-c, math.Min(c, x)) }
