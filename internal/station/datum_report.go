package station

import (
	"errors"
	"fmt"
	"io"
	"math"

	"lapwing/internal/datum"
	"lapwing/internal/passage"
	"lapwing/internal/skid"
)

// report writes everything for people: what was found, what the skid file says, what to think of it.
func (g *gathering) report(w io.Writer, name string, file *skid.Skid, found [][2]passage.Found) error {
	p := &page{w: w}
	p.say("Dead centre, clearances, pressure zeros and gauge passages from %s", name)
	p.say("The skid file is not changed. Intervals are meant to hold the truth in nine cases of ten or more.")
	estimated := 0
	for i := range g.throws {
		if g.throw(p, i, file, &found[i]) {
			estimated++
		}
	}
	if estimated == 0 {
		p.say("")
		p.say("Nothing could be estimated. It takes at least %d steady turns with every working end followed, line pressures, suction", leastMean)
		p.say("temperature and the gas.")
		return errors.Join(p.err, fmt.Errorf("datum: %s: no throw could be estimated", name))
	}
	for _, line := range datumAdvice {
		p.say("%s", line)
	}
	return p.err
}

var datumAdvice = []string{
	"",
	"What it is good for. The estimate holds for a machine without a leaking valve: a leak beyond a healthy one bends the",
	"strokes too. Best are four pressure ratios at two speeds, all valves good, each duty held for a minute.",
	"A wrong dead centre looks like this: the exponents of compression and expansion both too high (pressure early) or both",
	"too low (late), the indicated power off by about 2 % a degree, and no valve's leak. A wrong clearance moves both",
	"exponents too, that of expansion about three times as far; a wrong zero moves them and the opening angles.",
	"Where the file is outside an interval, do not change it on this alone. A dead centre is proven mechanically, at the",
	"flywheel or the crosshead, with the machine stopped, isolated, depressurised and locked out, driver included, by people",
	"authorised to do it; site permits, local codes and licensed practice come first. The same holds before anybody opens a",
	"gauge valve to look at a transducer's zero. A changed skid file asks for a new baseline.",
}

// throw writes one throw's part; false when nothing could be estimated.
func (g *gathering) throw(p *page, i int, file *skid.Skid, found *[2]passage.Found) bool {
	th := &g.sk.Throws[i]
	in := g.input(i)
	p.say("")
	left := len(g.throws[i].duties) - len(in.Duties)
	p.say("%s: %d duties%s", th.ID, len(in.Duties), few(left))
	for _, d := range in.Duties {
		w := 0.0
		for _, v := range d.Omega {
			w += v / float64(len(d.Omega))
		}
		p.say("  %3d turns at ratio %.2f, %.1f bar absolute suction, %.0f rpm", d.Turns, d.Pd/d.Ps, d.Ps/1e5, w*30/math.Pi)
	}
	ok := len(in.Duties) > 0
	if ok {
		r := datum.Estimate(in, datum.Priors{})
		if ok = r.Valid(); ok {
			g.estimate(p, i, &r)
		} else {
			p.say("  no estimate: %s", r.Reason)
		}
	}
	for e := range th.Ends {
		if th.Ends[e].Works && th.Ends[e].Pressure != "" {
			sayPassage(p, file, th.Ends[e].Pressure, &found[e])
		}
	}
	return ok
}

func few(n int) string {
	if n == 0 {
		return ""
	}
	return fmt.Sprintf(" (%d more with fewer than %d turns left out)", n, leastMean)
}

func (g *gathering) estimate(p *page, i int, r *datum.Result) {
	th := &g.sk.Throws[i]
	u := math.Hypot(r.DeadCentreDeg.U, g.u) // what is not known of the shaft's ripple is not known of the dead centre
	at := math.Mod(th.DeadCentre-r.DeadCentreDeg.X+360, 360)
	p.say("  dead centre        %7.2f° ±%.2f after the mark; the file says %.2f°: %s", at, u, th.DeadCentre, verdictOn(r.DeadCentreDeg.X, u, "°", 2))
	if g.u > r.DeadCentreDeg.U {
		p.say("                     (±%.2f of it because the speed ripple within a turn is not known that well)", g.u)
	}
	for e := range 2 {
		name := g.sk.EndName(i, e)
		if c := r.Clearance[e]; !math.IsNaN(c.X) {
			was := th.Cylinder.Clearance[e]
			p.say("  clearance %-8s %7.2f %% ±%.2f; the file says %.2f %%: %s", name, 100*c.X, 100*c.U, 100*was, verdictOn(100*(was-c.X), 100*c.U, " points", 2))
		}
	}
	for e := range 2 {
		if z := r.Zero[e]; !math.IsNaN(z.X) {
			p.say("  zero %-13s %+7.3f bar ±%.3f too high: %s", th.Ends[e].Pressure, z.X/1e5, z.U/1e5, verdictOn(z.X/1e5, z.U/1e5, " bar", 3))
		}
	}
	p.say("  exponent           %+7.4f ±%.4f on the gas's own: %s", r.K.X, r.K.U, verdictOn(r.K.X, r.K.U, "", 4))
	p.say("  left of ln p %.1e over %d strokes", r.RMS, r.Strokes)
	for _, s := range r.Remarks {
		p.say("  NOTE: %s", s)
	}
}

// verdictOn says whether the file is inside the interval.
func verdictOn(off, u float64, unit string, digits int) string {
	if math.Abs(off) <= u {
		return "agrees"
	}
	return fmt.Sprintf("OFF by %.*f%s", digits, math.Abs(off), unit)
}

func sayPassage(p *page, file *skid.Skid, id string, f *passage.Found) {
	ch, _ := file.ChannelByID(id)
	said, undone := "the file gives none", ""
	if ch.Passage > 0 {
		said = fmt.Sprintf("the file says %.0f Hz, Q %.1f", ch.Passage, ch.PassageQ)
	} else if f.Valid() {
		undone = "; undone for what stands above"
	}
	if !f.Valid() {
		p.say("  passage %-10s not found: %s; %s", id, f.Reason, said)
		return
	}
	p.say("  passage %-10s %.0f Hz ±%.0f, Q %.1f ±%.1f (%.0f times the shaft speed); %s%s", id, f.Hz, f.HzU, f.Q, f.QU, f.Orders, said, undone)
}
