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

// tally counts, over a group of cases, what the windows did with the model's impacts while following.
type tally struct {
	cases, turns   int
	seen, in       [window.Events]int // by event
	width          [window.Events]float64
	notFollowing   int // windows of delivering ends that did not follow, whatever the reason
	strange, marks int // opening windows with another valve's impact inside: unmarked, marked
	err            []float64
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
	sort.Float64s(a.err)
	q := func(p float64) float64 {
		if len(a.err) == 0 {
			return math.NaN()
		}
		return a.err[int(p*float64(len(a.err)-1))]
	}
	return s + fmt.Sprintf(" %s | %s | %.2f | %.2f |", share(a.notFollowing, total+a.notFollowing),
		share(a.strange, a.seen[window.SuctionOpens]+a.seen[window.DischargeOpens]), q(.5), q(.95))
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

// exponent is the gas's volume exponent at the lines that the process values show first.
func (c *gridCase) exponent(t testing.TB, sk *skid.Skid) float64 {
	line := sk.Process.Stages[sk.Throws[c.throw].Stage-1]
	d, err := c.gas.Duty(line.Ps, line.Ts, line.Pd)
	if err != nil {
		t.Fatal(err)
	}
	return d.KV
}

// add runs one case and counts it from the first turn after learning on, what comes before in early. Events that the
// model's books do not hold are not counted.
func (a *tally) add(t *testing.T, c *gridCase, early *tally) {
	turns := 0
	sk := c.run.Skid()
	works := make([][2]bool, len(sk.Throws))
	for i := range works {
		works[i] = [2]bool{sk.Throws[i].Ends[0].Works, sk.Throws[i].Ends[1].Works}
	}
	tr := window.NewTracker(window.Config{Works: works})
	k := c.exponent(t, sk)
	a.cases++
	early.cases++
	c.each(t, func(tn windowtest.Turn) {
		b := a
		if turns < learning {
			b = early
		}
		turns++
		b.turns++
		res := tr.Track(tn.Turn, c.inputs(sk, tn.Process, k))
		b.count(c.throw, tn, res)
	})
}

// count books one turn of one throw.
func (a *tally) count(throw int, tn windowtest.Turn, res window.Result) {
	for e, end := range res.Throws[throw].Ends {
		if tr := &tn.Truth[throw][e]; tr.Rev < 0 || tr.Idle {
			continue
		}
		for ev, w := range end.W {
			event := window.Event(ev)
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
	if gridTurns != nil {
		gridTurns(t, c, use)
		return
	}
	c.run.Turns(t, 180/c.run.RPM, use)
}

var gridTurns func(t *testing.T, c *gridCase, use func(windowtest.Turn))

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
// DEVELOPERS.md. The daily run holds one case to the target for openings; the sweep reports and does not judge.
func TestGrid(t *testing.T) {
	var names []string
	rows := map[string]*tally{}
	var early tally
	for i, c := range gridCases(t) {
		if !*sweep && i != 96 || *only != "" && !strings.Contains(strings.Join(c.rows, ","), *only) {
			continue
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
	if *sweep {
		return // measured, not judged
	}
	all := rows["all of these"]
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
	for ev := range a.seen {
		a.seen[ev] += b.seen[ev]
		a.in[ev] += b.in[ev]
		a.width[ev] += b.width[ev]
	}
}
