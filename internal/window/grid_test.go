package window_test

import (
	"flag"
	"fmt"
	"math"
	"sort"
	"strings"
	"testing"

	"lapwing/internal/model"
	"lapwing/internal/skid"
	"lapwing/internal/window"
	"lapwing/internal/window/windowtest"
)

var only = flag.String("only", "", "with -sweep: the cases of the rows whose name holds this")

var exact = flag.Bool("exact", false, "with -sweep: steady cases only, with dead centres and passages told as they are")

// tally counts, over a group of cases, what the windows did with the model's impacts while following.
type tally struct {
	cases, turns   int
	seen, in       [window.Events]int // by event
	width          [window.Events]float64
	notFollowing   int // windows of delivering ends that did not follow, whatever the reason
	strange, marks int // opening windows with another valve's impact inside: unmarked, marked
	mute           int // windows that do not say why they are where they are
	idle, busy     int // turns of ends that are held open: all, and those not seen to be idle
	err            []float64
	off            [3][]float64 // by steady case: power %, delivered mass %, reversal degrees
}

// row is the tally as a line of the table in DEVELOPERS.md.
func (a *tally) row(name string) string {
	share := func(n, of int) string {
		if of == 0 {
			return "–"
		}
		return fmt.Sprintf("%.1f", 100*float64(n)/float64(of))
	}
	s := fmt.Sprintf("| %s | %d | %d |", name, a.cases, a.turns)
	total := 0
	for _, ev := range []window.Event{window.SuctionOpens, window.DischargeOpens, window.SuctionCloses, window.DischargeCloses} {
		s += fmt.Sprintf(" %s (%.0f°) |", share(a.in[ev], a.seen[ev]), a.width[ev]/float64(max(a.seen[ev], 1)))
		total += a.seen[ev]
	}
	s += fmt.Sprintf(" %s | %s | %.2f | %.2f |", share(a.notFollowing, total+a.notFollowing),
		share(a.strange, a.seen[window.SuctionOpens]+a.seen[window.DischargeOpens]), quantile(a.err, .5), quantile(a.err, .95))
	for _, x := range a.off {
		if len(x) == 0 {
			s += " – |"
			continue
		}
		s += fmt.Sprintf(" %.2f, %.2f |", quantile(x, .5), quantile(x, .95))
	}
	return s
}

// quantile sorts and picks; NaN of nothing.
func quantile(x []float64, p float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	sort.Float64s(x)
	return x[int(p*float64(len(x)-1)+.5)]
}

// learning is how many turns a valve's lag is learnt in; widths of those turns are wide and are not counted with the rest.
const learning = 14

// inputs tells the tracker what the station would tell it.
func (c *gridCase) inputs(sk *skid.Skid, p skid.Process, k float64) []window.Input {
	step, _ := sk.FindStep(p.Step)
	in := make([]window.Input, len(sk.Throws))
	for i := range in {
		line := p.Stages[sk.Throws[i].Stage-1]
		in[i] = window.Input{Cylinder: sk.CylinderAt(i, p.Step), K: k, LinePs: line.Ps, LinePd: line.Pd}
		for e := range in[i].Others {
			name := sk.EndName(i, e)
			in[i].IdleHint[e], in[i].Late[e] = step.Idle[name], step.Late[name]
			for _, s := range sk.Steps {
				in[i].Others[e] = append(in[i].Others[e], sk.CylinderAt(i, s.Code).Clearance[e])
			}
		}
	}
	return in
}

// add runs one case and counts it from the first turn after learning on, what comes before in early. Events that the
// model's books do not hold are not counted.
func (a *tally) add(t *testing.T, c *gridCase, early *tally) {
	turns := 0
	sk := c.run.Skid()
	ledger := newBooks(sk, c.throw)
	works := make([][2]bool, len(sk.Throws))
	for i := range works {
		works[i] = [2]bool{sk.Throws[i].Ends[0].Works, sk.Throws[i].Ends[1].Works}
	}
	tr := window.NewTracker(window.Config{Works: works})
	a.cases++
	early.cases++
	c.each(t, func(tn windowtest.Turn) {
		b := a
		if turns < learning {
			b = early
		}
		turns++
		b.turns++
		k := ledger.of(t, c, tn.Process.Stages[sk.Throws[c.throw].Stage-1]).KV
		in := c.inputs(sk, tn.Process, k)
		res := tr.Track(tn.Turn, in)
		b.count(c.throw, tn, res)
		if c.steady && b == a {
			ledger.turn(t, c, sk, tn, in, res)
		}
	})
	ledger.close(a)
}

// count books one turn of one throw.
func (a *tally) count(throw int, tn windowtest.Turn, res window.Result) {
	for e, end := range res.Throws[throw].Ends {
		if tr := &tn.Truth[throw][e]; tr.Rev < 0 {
			continue
		} else if tr.Idle {
			a.idle++
			if end.State != window.Idle {
				a.busy++
			}
			continue
		}
		for ev, w := range end.W {
			event := window.Event(ev)
			if w.Why == "" {
				a.mute++
			}
			// happened asks for a window; one that is lost is counted by its truth.
			truth, ok := happened(tn, throw, e, event)
			if !ok {
				continue
			}
			if w.State != window.Following {
				a.notFollowing++
				continue
			}
			a.seen[ev]++
			a.width[ev] += w.Hi - w.Lo
			if truth.Impact >= w.Lo && truth.Impact <= w.Hi {
				a.in[ev]++
			}
			if event != window.SuctionOpens && event != window.DischargeOpens {
				continue
			}
			if !math.IsNaN(w.Angle) {
				a.err = append(a.err, math.Abs(w.Angle-truth.Lift))
			}
			if stranger(tn, throw, e, event, w) {
				if w.Shared {
					a.marks++
				} else {
					a.strange++
				}
			}
		}
	}
}

// each gives the turns of a case, the first three left out.
func (c *gridCase) each(t *testing.T, use func(windowtest.Turn)) {
	c.run.Turns(t, 180/c.run.RPM, use)
}

// stranger says whether another event of the throw strikes inside the window.
func stranger(tn windowtest.Turn, throw, e int, ev window.Event, w window.Window) bool {
	for e2 := range 2 {
		for ev2 := range window.Event(window.Events) {
			if e2 == e && ev2 == ev || tn.Truth[throw][e2].Rev < 0 {
				continue
			}
			if x, ok := happened(tn, throw, e2, ev2); ok && x.Impact >= w.Lo && x.Impact <= w.Hi {
				return true
			}
		}
	}
	return false
}

// happened gives the truth of an event on the padded grid's scale, as find does, for any throw.
func happened(tn windowtest.Turn, throw, e int, ev window.Event) (model.Event, bool) {
	one := windowtest.Turn{Truth: [][2]model.Truth{tn.Truth[throw]}}
	return find(one, e, ev, window.Window{})
}

// TestGrid measures the windows over machines, gases, ratios, speeds and load devices, and prints the table of
// DEVELOPERS.md. The daily run holds one case to the targets for openings; the sweep reports and does not judge.
func TestGrid(t *testing.T) {
	var names []string
	rows := map[string]*tally{}
	var early tally
	for _, c := range gridCases(t, *sweep) {
		if *only != "" && !strings.Contains(strings.Join(c.rows, ","), *only) {
			continue
		}
		if *exact {
			if !c.steady {
				continue
			}
			c.run.Told = windowtest.Told{U: .3}
		}
		var one tally
		one.add(t, &c, &early)
		for _, r := range c.rows {
			if rows[r] == nil {
				rows[r] = &tally{}
				names = append(names, r)
			}
			rows[r].merge(&one)
		}
	}
	for _, n := range names {
		t.Log(rows[n].row(n))
	}
	t.Log(early.row("first 14 turns of every case"))
	idle, busy := early.idle, early.busy
	for _, r := range names {
		if r != "all of these" && !strings.HasPrefix(r, "ratio") && !strings.HasSuffix(r, "rpm") && !strings.HasSuffix(r, "pulsation") && !strings.Contains(r, "rated speed") {
			idle, busy = idle+rows[r].idle, busy+rows[r].busy
		}
	}
	t.Logf("ends held open: %d turns, taken for working in %d", idle, busy)
	mute := early.mute
	for _, r := range rows {
		mute += r.mute
	}
	if mute > 0 {
		t.Errorf("%d windows do not say why they are where they are", mute)
	}
	if *sweep {
		return // measured, not judged
	}
	all := rows["all of these"]
	if !(quantile(all.err, .5) <= .4 && quantile(all.err, .95) <= 1.2) {
		t.Errorf("opening error: median %.2f°, 95 %% %.2f°", quantile(all.err, .5), quantile(all.err, .95))
	}
	for _, ev := range []window.Event{window.SuctionOpens, window.DischargeOpens} {
		if all.seen[ev] == 0 || float64(all.in[ev]) < .999*float64(all.seen[ev]) {
			t.Errorf("event %d inside: %d of %d", ev, all.in[ev], all.seen[ev])
		}
	}
}

// merge adds another tally.
func (a *tally) merge(b *tally) {
	a.cases += b.cases
	a.turns += b.turns
	a.notFollowing += b.notFollowing
	a.strange += b.strange
	a.marks += b.marks
	a.err = append(a.err, b.err...)
	a.mute += b.mute
	a.idle += b.idle
	a.busy += b.busy
	for k := range a.off {
		a.off[k] = append(a.off[k], b.off[k]...)
	}
	for ev := range a.seen {
		a.seen[ev] += b.seen[ev]
		a.in[ev] += b.in[ev]
		a.width[ev] += b.width[ev]
	}
}
