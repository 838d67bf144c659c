package window_test

import (
	"math"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

// books compares the measures that stand on the windows with the model's own books, over one case.
type books struct {
	m       *measure.Measurer
	v       measure.Vector
	gases   map[[3]float64]measure.Gas
	throw   int
	got     [2][2][]float64 // by end: work J, delivered kg/s
	truth   [2][2]float64   // sums
	n       [2]float64
	reverse []float64 // degrees off, by turn
}

func newBooks(sk *skid.Skid, throw int) *books {
	b := &books{gases: map[[3]float64]measure.Gas{}, throw: throw}
	var m measure.Machine
	for _, th := range sk.Throws {
		out := measure.Throw{ID: th.ID, Stage: th.Stage, BlindAtSuction: th.BlindAtSuction}
		for e, end := range th.Ends {
			out.Ends[e].Works, out.Ends[e].Blind = end.Works, !end.Works
		}
		m.Throws = append(m.Throws, out)
	}
	b.m = measure.New(measure.Config{Machine: m, Atmosphere: sk.Machine.Atmosphere})
	return b
}

// of is the gas at a duty; duties within half a per cent share it.
func (b *books) of(t testing.TB, c *gridCase, line skid.Line) measure.Gas {
	duty := [3]float64{math.Round(200 * math.Log(line.Ps)), math.Round(line.Ts), math.Round(200 * math.Log(line.Pd))}
	g, known := b.gases[duty]
	if !known {
		var err error
		if g, err = measure.NewGas(c.gas, math.Exp(duty[0]/200), duty[1], math.Exp(duty[2]/200)); err != nil {
			t.Fatal(err)
		}
		b.gases[duty] = g
	}
	return g
}

// turn measures one turn.
func (b *books) turn(t testing.TB, c *gridCase, sk *skid.Skid, tn windowtest.Turn, in []window.Input, w window.Result) {
	mi := make([]measure.Input, len(in))
	for i := range in {
		line := tn.Process.Stages[sk.Throws[i].Stage-1]
		mi[i] = measure.Input{Cylinder: in[i].Cylinder, LinePs: line.Ps, LinePd: line.Pd, Ts: line.Ts, Td: line.Td, Gas: b.of(t, c, line)}
	}
	b.m.Measure(&b.v, tn.Turn, w, mi)
	id := sk.Throws[b.throw].ID
	find := func(subject, name string) float64 {
		i := b.m.Layout().Find(subject, name)
		if i < 0 {
			t.Fatalf("no measure %s of %s", name, subject)
		}
		return b.v.V[i]
	}
	for e := range sk.Throws[b.throw].Ends {
		tr := &tn.Truth[b.throw][e]
		if tr.Rev < 0 || tr.Idle || !sk.Throws[b.throw].Ends[e].Works {
			continue
		}
		b.n[e]++
		b.truth[e][0] += tr.Work
		b.truth[e][1] += tr.Delivered * tr.RPM / 60
		end := id + [2]string{".he", ".ce"}[e]
		for k, name := range []string{"indicated_work_j", "delivered_kg_h"} {
			if x := find(end, name); !math.IsNaN(x) {
				b.got[e][k] = append(b.got[e][k], x)
			}
		}
	}
	if tr := &tn.Truth[b.throw][crank.HE]; tr.Rev >= 0 {
		if x := find(id, "reversal_deg"); !math.IsNaN(x) {
			b.reverse = append(b.reverse, math.Abs(x-tr.Pin.Longest))
		}
	}
}

// close adds the case's errors to a tally: per cent of the cylinder's power and delivered mass, degrees of reversal.
func (b *books) close(a *tally) {
	for k := range a.off[:2] {
		got, truth := 0.0, 0.0
		for e := range b.got {
			if n := b.n[e]; n == 0 {
				continue
			} else if x := b.got[e][k]; float64(len(x)) > n/2 {
				got, truth = got+median(x), truth+b.truth[e][k]/n
			} else {
				got = math.NaN()
			}
		}
		if truth != 0 && !math.IsNaN(got) {
			a.off[k] = append(a.off[k], math.Abs(100*(got/truth-1)))
		}
	}
	if len(b.reverse) > 0 {
		a.off[2] = append(a.off[2], median(b.reverse))
	}
}
