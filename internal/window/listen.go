package window

import (
	"math"

	"lapwing/internal/dsp"
	"lapwing/internal/turn"
)

// hear books where each end's suction closing is heard. At full load the pressure hardly shows it (the volume stands
// still, and pulsation moves it); what the accelerometers hear there is the closing of one of two valves, and that of
// the other end's discharge valve the pressure does show.
func (t *Tracker) hear(th *throw, tt *turn.Throw) {
	m := 6 * tt.RPM / 1000 // degrees per ms
	for e := range th.now {
		see, mem := &th.now[e], &th.memory[e]
		if !see.working || see.heldLate {
			continue
		}
		start := strokeStart(e, Compression)
		if c := see.close[Compression]; c > lateClosing {
			if _, at, ok := t.train(th, tt, e, start+c-3, start+c+searchDeg+searchMs*m); ok {
				mem.lag.push((at-start-c)/m, heardTurns)
			}
			continue
		}
		hi := start + heardTo // a stroke that is closed has nothing left to close
		if !math.IsNaN(see.runs) {
			hi = math.Min(hi, see.runs+heardRun+heardRunMs*m)
		}
		if loudest, last, ok := t.train(th, tt, e, start+heardFrom, hi); ok {
			mem.heard[0].push(loudest-start, heardTurns)
			mem.heard[1].push(last-start, heardTurns)
		}
	}
}

// train gives the angles at which the loudest burst between two angles peaks, and the last loud one, away from where
// other events ring that the pressure shows; false when nothing stands out. A valve that flutters strikes its seat
// several times: between these two it has closed.
func (t *Tracker) train(th *throw, tt *turn.Throw, e int, lo, hi float64) (loudest, last float64, ok bool) {
	g := tt.Grid
	a, b := max(int(math.Ceil(g.Index(lo))), 0), min(int(g.Index(hi)), g.N-1)
	if b-a < 4 {
		return 0, 0, false
	}
	if cap(t.deaf) < g.N {
		t.deaf = make([]bool, g.N)
	}
	t.deaf = t.deaf[:g.N]
	for i := a; i <= b; i++ {
		t.deaf[i] = th.rings(tt, e, g.At(i))
	}
	apart := max(1, int(heardApart*6*tt.RPM/1000/g.Step))
	loud := 0.0
	for v := range tt.Vib {
		vib := &tt.Vib[v]
		if vib.Suspect != "" || len(vib.Peak) != g.N || len(vib.RMS) != g.N {
			continue
		}
		top := 0.0 // the throw's loudest of the turn
		for _, p := range vib.Peak {
			if p > top {
				top = p
			}
		}
		t.buf = append(t.buf[:0], vib.RMS[a:b+1]...)
		floor := math.Max(burstRatio*dsp.MedianInPlace(t.buf), heardOfTop*top)
		most, at := 0.0, -1
		for i := a; i <= b; i++ {
			if p := vib.Peak[i]; p > most && !t.deaf[i] && bursts(vib.Peak, i, apart) {
				most, at = p, i
			}
		}
		if most <= floor || most <= loud {
			continue
		}
		loud, loudest, last, ok = most, g.At(at), g.At(at), true
		for i := b; i > at; i-- {
			if p := vib.Peak[i]; p >= heardShare*most && p > floor && !t.deaf[i] && bursts(vib.Peak, i, apart) {
				last = g.At(i)
				break
			}
		}
	}
	return loudest, last, ok
}

// bursts reports whether a burst peaks at a point: nothing near is higher, and what was there before is much lower, so
// that it is not the end of an earlier one's ringing.
func bursts(x []float64, at, apart int) bool {
	for i := max(at-apart, 0); i <= min(at+apart, len(x)-1); i++ {
		if x[i] > x[at] {
			return false
		}
	}
	for i := max(at-3*apart, 0); i < at-apart; i++ {
		if heardRise*x[i] > x[at] {
			return false
		}
	}
	return true
}

// around finds the angles at which the valves of the other throws open, as this throw's degrees: their impacts ring across.
func (t *Tracker) around(tn *turn.Turn, i int) {
	th, tt := &t.throws[i], &tn.Throws[i]
	th.foreign = th.foreign[:0]
	for j := range tn.Throws {
		if j == i || j >= len(t.throws) || !usable(&tn.Throws[j]) {
			continue
		}
		shift := (tn.Throws[j].T0 - tt.T0) / (tt.T1 - tt.T0) * 360
		for e := range t.throws[j].now {
			for _, at := range t.throws[j].now[e].at {
				if !math.IsNaN(at) {
					th.foreign = append(th.foreign, math.Mod(at+shift+720, 360))
				}
			}
		}
	}
}

// rings reports whether another event than the suction closing of an end may ring at an angle: an opening of either
// end or of another throw, or the other end's discharge closing.
func (th *throw) rings(tt *turn.Throw, e int, deg float64) bool {
	m := 6 * tt.RPM / 1000
	for _, at := range th.foreign {
		if within(deg, at-lead, at+afterOpening+(foreignMs+afterOpeningMs)*m) {
			return true
		}
	}
	for e2 := range th.now {
		see := &th.now[e2]
		if !see.working {
			continue
		}
		for _, at := range see.at {
			if within(deg, at-lead-tt.U, at+afterOpening+(afterOpeningMs)*m+tt.U) {
				return true
			}
		}
		if e2 == e {
			continue
		}
		c := see.close[Expansion]
		if math.IsNaN(c) {
			c = 0
		}
		if c += strokeStart(e2, Expansion); within(deg, c-hushed, c+hushedDeg+hushedMs*m) {
			return true
		}
	}
	return false
}
