package station

import (
	"fmt"
	"math"

	"lapwing/internal/chart"
	"lapwing/internal/crank"
	"lapwing/internal/skid"
	"lapwing/internal/window"
)

// Picture copies what charts show of one throw out of the turn that o brought. It may be asked for in the callback that
// hears of the turn, and stays good.
func (l *Line) Picture(o *Output, throw int) (chart.Cylinder, error) {
	sk := &l.sk.Throws[throw]
	t := o.Turn
	if t == nil || !t.Valid() || throw >= len(t.Throws) {
		why := "no turn"
		if t != nil {
			why = t.Reason
		}
		return chart.Cylinder{}, fmt.Errorf("station: no picture of %s: %s", sk.ID, why)
	}
	th, w, in, p := &t.Throws[throw], &o.Windows.Throws[throw], &l.mea[throw], &o.Points[throw]
	c := chart.Cylinder{Name: sk.ID, Lo: th.Grid.Lo, Step: th.Grid.Step, AngleU: th.U,
		About: fmt.Sprintf("%s, turn %d, %s UTC, %.1f rpm, load step %d, %s", l.sk.ID, t.Number, o.At.UTC().Format("2006-01-02 15:04:05.000"), th.RPM, p.Step, p.State)}
	for e := range c.Ends {
		if th.P[e] == nil || th.Bad[e] != "" {
			continue
		}
		end := &chart.End{P: append([]float64(nil), th.P[e]...), V: in.Cylinder.Volumes(nil, e, th.Grid.Lo, th.Grid.Step, th.Grid.N),
			LinePs: in.LinePs, LinePd: in.LinePd, State: w.Ends[e].State.String()}
		for k, r := range w.Ends[e].Closed {
			if r.OK {
				end.Strokes[k] = chart.Stroke{From: r.I0, To: r.I1, N: r.Slope}
			}
		}
		for ev := range w.Ends[e].W {
			if x := &w.Ends[e].W[ev]; x.State != window.Lost && x.State != window.Idle {
				end.Events = append(end.Events, chart.Event{
					Suction: ev == int(window.SuctionOpens) || ev == int(window.SuctionCloses), Opens: ev == int(window.SuctionOpens) || ev == int(window.DischargeOpens),
					Angle: x.Angle, Expected: x.Expected, Lo: x.Lo, Hi: x.Hi, Sure: x.State == window.Following, Shared: x.Shared})
			}
		}
		c.Ends[e] = end
	}
	for i := range th.Vib {
		if th.Vib[i].Suspect == "" {
			c.Vib = append(c.Vib, chart.Vib{Channel: th.Vib[i].Channel, Peak: append([]float64(nil), th.Vib[i].Peak...)})
		}
	}
	c.Load = l.loadPicture(&c, sk, in.Cylinder, th.Omega, in.LinePs, throw)
	return c, nil
}

// loadPicture is the rod load over the grid; nil when an end that works was not measured.
func (l *Line) loadPicture(c *chart.Cylinder, sk *skid.Throw, cyl crank.Cylinder, omega []float64, ps float64, throw int) *chart.Load {
	var p [2]crank.Pressure
	for e := range p {
		switch {
		case c.Ends[e] != nil:
			p[e].P = c.Ends[e].P
		case !sk.Ends[e].Works && !sk.BlindAtSuction:
			p[e].Held = l.sk.Machine.Atmosphere
		case !sk.Ends[e].Works && ps > 0:
			p[e].Held = ps
		default:
			return nil
		}
	}
	var loads crank.Loads
	if err := cyl.RodLoads(&loads, nil, p[crank.HE], p[crank.CE], c.Lo, c.Step, len(omega), l.sk.Machine.Atmosphere, omega); err != nil {
		return nil
	}
	r := chart.Load{Gas: loads.Gas, Pin: loads.Pin, RatedPush: l.sk.Machine.RodLoadCompression, RatedPull: l.sk.Machine.RodLoadTension,
		ReversalDeg: math.NaN(), ReversalShare: math.NaN()}
	if i, j := l.layout.Find(sk.ID, "reversal_deg"), l.layout.Find(sk.ID, "reversal_percent"); i >= 0 && j >= 0 {
		r.ReversalDeg, r.ReversalShare = l.vec.V[i], l.vec.V[j]
	}
	return &r
}
