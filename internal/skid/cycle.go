package skid

import (
	"errors"
	"fmt"
	"math"

	"lapwing/internal/crank"
	"lapwing/internal/gas"
)

// idealEnd is one end's cycle without valve losses, leaks or pulsation: polytropes with the gas's volume exponent
// between straight suction and discharge lines. Angles are NaN where the event does not happen.
type idealEnd struct {
	works, idle                     bool
	suctionOpens, suctionCloses     float64 // degrees
	dischargeOpens, dischargeCloses float64
	ve                              float64 // suction volume over swept volume
	work                            float64 // J per turn
	p                               []float64
	swept, clearance                float64 // m³
}

// delivers reports whether the end moves gas.
func (e idealEnd) delivers() bool { return e.ve > 0 }

// idealThrow is one throw's ideal cycle and what it does to the rod at the rated speed.
type idealThrow struct {
	ends     [2]idealEnd
	gas, pin crank.Reversal
	power    float64 // W at the rated speed, both ends
	flow     float64 // kg/s at the rated speed
	kv       float64
}

const cyclePoints = 3600 // one turn in tenths of a degree: peaks stand at corners, which a coarse grid would cut

// ideal computes a throw's cycle in a load step, for its line and the gas's properties there.
func (sk *Skid) ideal(throw int, st Step, line Line, g gas.Props) idealThrow {
	return sk.idealHeld(throw, st, line, g, -1, 0)
}

// idealHeld is ideal with one end held at a pressure all turn; −1: none.
func (sk *Skid) idealHeld(throw int, st Step, line Line, g gas.Props, heldEnd int, held float64) idealThrow {
	t := &sk.Throws[throw]
	c := sk.CylinderAt(throw, st.Code)
	out := idealThrow{kv: g.KV}
	blind := sk.Machine.Atmosphere
	if t.BlindAtSuction {
		blind = line.Ps
	}
	var p [2]crank.Pressure
	for e := range t.Ends {
		name := sk.EndName(throw, e)
		late := math.NaN()
		if v, ok := st.Late[name]; ok {
			late = v
		}
		end := idealCycle(c, e, t.Ends[e].Works, st.Idle[name], late, line.Ps, line.Pd, g.KV)
		out.ends[e] = end
		p[e] = crank.Pressure{P: end.p, Held: blind}
		if e == heldEnd {
			p[e] = crank.Pressure{Held: held}
		}
		out.power += end.work * sk.Machine.RatedRPM / 60
		out.flow += end.ve * end.swept * line.Ps / (g.Zs * g.R * line.Ts) * sk.Machine.RatedRPM / 60
	}
	var l crank.Loads
	omega := []float64{2 * math.Pi * sk.Machine.RatedRPM / 60}
	if err := c.RodLoads(&l, nil, p[crank.HE], p[crank.CE], 0, 360.0/cyclePoints, cyclePoints, sk.Machine.Atmosphere, omega); err != nil {
		panic(fmt.Sprintf("skid: own grid refused: %v", err)) // lengths are fixed above
	}
	out.gas, out.pin = crank.Reverse(l.Gas), crank.Reverse(l.Pin)
	return out
}

// idealCycle is the textbook cycle of one end. late is the suction valve's closing, degrees after the dead centre of
// the largest volume, NaN when it closes there.
//
//	suction opens at   V = Vc (pd/ps)^(1/n)
//	discharge opens at V = V1 (ps/pd)^(1/n), V1 the volume where the suction valve closes
//	work = n/(n−1) ps (V1 − V_so) [(pd/ps)^((n−1)/n) − 1]
func idealCycle(c crank.Cylinder, e int, works, idle bool, late, ps, pd, n float64) idealEnd {
	nan := math.NaN()
	end := idealEnd{works: works, idle: idle, suctionOpens: nan, suctionCloses: nan, dischargeOpens: nan, dischargeCloses: nan,
		swept: c.Swept(e), clearance: c.ClearanceVolume(e)}
	if !works {
		return end // p stays nil: the rod load takes what stands in a blind end
	}
	end.p = make([]float64, cyclePoints)
	for i := range end.p {
		end.p[i] = ps
	}
	if idle {
		return end
	}
	outer, inner := 180.0, 0.0 // dead centres of the largest and the least volume
	if e == crank.CE {
		outer, inner = 0, 180
	}
	v1 := end.clearance + end.swept
	end.suctionCloses = outer
	if !math.IsNaN(late) {
		end.suctionCloses = math.Mod(outer+late, 360)
		v1 = c.Volume(e, end.suctionCloses)
	}
	vso := end.clearance * math.Pow(pd/ps, 1/n)
	vdo := v1 * math.Pow(ps/pd, 1/n)
	delivers := vso < v1 && vdo > end.clearance
	if delivers {
		end.suctionOpens = c.AngleOf(e, vso, false)
		end.dischargeOpens = c.AngleOf(e, vdo, true)
		end.dischargeCloses = inner
		end.ve = (v1 - vso) / end.swept
		end.work = n / (n - 1) * ps * (v1 - vso) * (math.Pow(pd/ps, (n-1)/n) - 1)
	}
	for i := range end.p {
		deg := float64(i) * 360 / cyclePoints
		v := c.Volume(e, deg)
		compressing := math.Mod(deg-outer+360, 360) < 180
		switch {
		case !delivers: // the gas goes up and down the same line
			end.p[i] = math.Max(ps, ps*math.Pow(v1/v, n))
		case compressing && v < v1:
			end.p[i] = math.Min(pd, ps*math.Pow(v1/v, n))
		case !compressing:
			end.p[i] = math.Max(ps, pd*math.Pow(end.clearance/v, n))
		}
	}
	if !delivers {
		end.suctionCloses = nan
	}
	return end
}

// duty is a stage's line and gas properties at the fixed process values; err says why there are none.
type duty struct {
	line Line
	gas  gas.Props
	err  error
}

// duties computes the duty of every stage. The equation of state is slow: once per check, not once per use.
func (sk *Skid) duties() []duty {
	out := make([]duty, sk.Stages())
	for i := range out {
		d := &out[i]
		if !sk.Process.Known || i >= len(sk.Process.Stages) {
			d.err = fmt.Errorf("the file gives no process values for stage %d", i+1)
			continue
		}
		d.line = sk.Process.Stages[i]
		if d.line.Pd <= d.line.Ps {
			d.err = errors.New("discharge pressure is not above suction pressure")
			continue
		}
		d.gas, d.err = sk.Gas.Duty(d.line.Ps, d.line.Ts, d.line.Pd)
	}
	return out
}
