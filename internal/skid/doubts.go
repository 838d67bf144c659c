package skid

import (
	"fmt"
	"math"
	"net"

	"lapwing/internal/crank"
)

// Bounds beyond which the check doubts. Sources: API 618, 5th ed., for temperatures (6.3) and reversal (6.6.4), both
// from memory; piston speed and clearance are the trade's usual ranges.
const (
	hotC          = 150.0 // predicted discharge temperature, °C
	hotHydrogenC  = 135.0 // ... for hydrogen-rich gas
	hydrogenRich  = 0.012 // kg/mol, molar mass up to which a gas counts as hydrogen-rich
	leastPerPoint = 2.0   // samples per half degree
	slowPiston    = 2.5   // m/s
	fastPiston    = 6.0   // m/s
)

// doubter collects what is possible but odd.
type doubter struct {
	sk     *Skid
	duties []duty
	out    []Problem
}

// add notes a doubt at the place of a path, or of the nearest enclosing path that stands in the file.
func (d *doubter) add(path, meaning, format string, args ...any) {
	d.out = append(d.out, Problem{d.sk.File, d.sk.placeOf(path), path, fmt.Sprintf(format, args...), meaning})
}

// placeOf finds a path in the file, going outward until one is found.
func (sk *Skid) placeOf(path string) Place {
	for p := path; ; {
		if at, ok := sk.at[p]; ok {
			return at
		}
		cut := -1
		for i := len(p) - 1; i >= 0; i-- {
			if p[i] == '.' || p[i] == '[' {
				cut = i
				break
			}
		}
		if cut < 0 {
			return sk.at[""]
		}
		p = p[:cut]
	}
}

// Doubts lists everything that is possible but odd, in the order of the file. Fix says in two sentences what the odd
// value means physically and how people usually find out.
func Doubts(sk *Skid) []Problem { return doubtsAt(sk, sk.duties()) }

func doubtsAt(sk *Skid, ds []duty) []Problem {
	d := &doubter{sk: sk, duties: ds}
	d.sampling()
	d.grid()
	d.phase()
	d.throws()
	d.channels()
	d.steps()
	d.gas()
	d.duty()
	d.limits()
	d.edges()
	d.modbus()
	sortProblems(d.out)
	return d.out
}

func (d *doubter) sampling() {
	sk := d.sk
	if sk.Rate <= 0 {
		d.add("acquisition", "The rate then comes from the source, and nothing here could be checked against it. Write acquisition: sampling_hz as it is set on the converter.",
			"no sampling rate is stated")
		return
	}
	if n := sk.Rate / (sk.Machine.MaxRPM / 60) / 720; n < leastPerPoint {
		d.add("acquisition.sampling_hz", fmt.Sprintf("Pressures are wanted every half degree, and a valve moves in a degree or two, so events smear at high speed. Multiply: %s samples/s over %s turns/s over 720.", short(sk.Rate), short(sk.Machine.MaxRPM/60)),
			"only %.2g samples per half degree at %s rpm", n, short(sk.Machine.MaxRPM))
	}
	top := math.Max(sk.Detection.ImpactBand[1], sk.Detection.LeakBand[1])
	if 0.45*sk.Rate < top {
		d.add("acquisition.sampling_hz", "Above 0.45 of the sampling rate nothing can be filtered, so the bands are cut there and leak noise, which lives at 10 to 20 kHz, may be lost. Compare twice the upper edge with the converter's rate.",
			"the vibration bands reach to %s Hz, the sampling carries %s Hz", short(top), short(0.45*sk.Rate))
	}
}

// leastBand is what pressures should be seen up to, Hz: a valve opens within a millisecond, gauge passages ring at 400
// to 2000 Hz.
const leastBand = 1500

func (d *doubter) grid() {
	m, g := d.sk.Machine, d.sk.Detection.GridDeg
	if b := d.sk.PressureBand(m.MinRPM); b < leastBand && (d.sk.Rate <= 0 || b < 0.165*d.sk.Rate) {
		d.add("detection.grid_deg", "On a slow machine half a degree is long: openings are rounded off and the gauge passage cannot be undone. A finer grid (0.25, 0.2, 0.1) costs no more than the usual one on a machine twice as fast.",
			"on a grid of %s° pressures are seen up to %.0f Hz only at %s rpm", short(g), b, short(m.MinRPM))
	}
}

func (d *doubter) phase() {
	p := d.sk.Phase
	var bare []string
	any := p.Ripple != nil
	for _, s := range d.sk.Steps {
		if s.Ripple != nil {
			any = true
		} else if p.Ripple == nil {
			bare = append(bare, fmt.Sprint(s.Code))
		}
	}
	switch {
	case p.Wheel.Teeth > 0: // the teeth measure the ripple
	case !any && p.Uncertainty == 0 && !d.sk.ComputesRipple():
		d.add("phase", "A shaft does not turn evenly within a turn; with one mark and no ripple given, angles may be up to 1.2° off and windows are widened by it. A temporary toothed wheel measures it (lapwing ripple); with machine.inertia_kgm2 and a pressure in every working end it is computed.",
			"one mark a turn, and neither ripple nor uncertainty_deg is stated")
	case any && len(bare) > 0:
		d.add("load_steps", "In a step without a ripple angles may be up to 1.2° off. Record the toothed wheel in each step (lapwing ripple), or give phase.ripple for the rest.",
			"some load steps have a ripple, these have none: %s", list(bare))
	}
	d.harmonics("phase", p.Ripple)
	for i, s := range d.sk.Steps {
		d.harmonics(fmt.Sprintf("load_steps[%d]", i), s.Ripple)
	}
	if end := d.sk.unmeasured(); d.sk.Machine.Inertia > 0 && !any && end != "" {
		d.add("machine.inertia_kgm2", "The ripple can be computed from the torque of all throws, but only when every working end has a pressure.",
			"%s has no pressure channel, so the inertia serves nothing", end)
	}
}

func (d *doubter) harmonics(path string, hs []Ripple) {
	for i, h := range hs {
		if h.Amp > 0.03 {
			d.add(fmt.Sprintf("%s.ripple[%d].amplitude_percent", path, i), "Compressor shafts run 0.5 to 2 % uneven; more is a flywheel too small or a wheel read wrongly. Compare with the torsional analysis.",
				"a ripple of %s %%", short(h.Amp*100))
		}
	}
}

func (d *doubter) throws() {
	for i := range d.sk.Throws {
		t := &d.sk.Throws[i]
		path := fmt.Sprintf("throws[%d]", i)
		c := t.Cylinder
		if len(t.Accel) == 0 {
			d.add(path, "Without vibration no finding on this throw can be confirmed, because that takes two kinds of signal. People notice when every finding stays an advisory.",
				"throw %s has no accelerometer", t.ID)
		}
		if u := c.MeanPistonSpeed(d.sk.Machine.RatedRPM); u < slowPiston || u > fastPiston {
			d.add(path+".stroke_mm", "Machines run at 3 to 5 m/s; far outside, stroke or speed is usually wrong. Compare with the name plate.",
				"mean piston speed %.1f m/s at %s rpm", u, short(d.sk.Machine.RatedRPM))
		}
		if l := c.ConRod / c.Radius(); l < 3.5 || l > 8 {
			d.add(path+".rod_length_mm", "4 to 6 crank radii are usual; a wrong length moves every angle between the dead centres. The drawing gives the distance of the bearing centres, which is not the piston rod's length.",
				"the connecting rod is %.1f crank radii long", l)
		}
		if c.MassPiston == 0 || c.MassCrosshead == 0 {
			d.add(path, "The rod load is then gas load with too little inertia, and reversal comes out wrong at speed. The maker's data sheet lists the reciprocating masses.",
				"throw %s lacks mass_piston_kg or mass_crosshead_kg", t.ID)
		}
		for e := range t.Ends {
			d.end(i, e)
		}
	}
	if d.sk.Machine.RodLoadCompression == 0 || d.sk.Machine.RodLoadTension == 0 {
		d.add("machine", "Rod loads are still computed, but with nothing to compare them with no overload can be told. The frame's data sheet gives both directions.",
			"no rated rod load")
	}
}

func (d *doubter) end(i, e int) {
	sk := d.sk
	t := &sk.Throws[i]
	end := &t.Ends[e]
	if !end.Works {
		return
	}
	path, name := fmt.Sprintf("throws[%d].%s", i, endKeys[e]), sk.EndName(i, e)
	if end.Pressure == "" {
		d.add(path, "Without it no valve event of this end can be followed, so its windows stay lost and it is not watched. The trend of the other end does not show its valves.",
			"%s has no pressure channel", name)
	}
	if c := t.Cylinder.Clearance[e]; c < 0.05 || c > 0.6 {
		d.add(path+".clearance_percent", "Clearance sets where the valves open: 10 to 40 % is usual, less hardly fits two valves, more delivers little. Compare the expansion line of a healthy p–V diagram: a wrong clearance moves both exponents the same way, the expansion most.",
			"clearance of %s is %s %%", name, short(c*100))
	}
	covered := 0
	for k, group := range [2][]Valve{end.Suction, end.Discharge} {
		area := 0.0
		for _, v := range group {
			area += v.FlowArea
			if v.Cover != "" {
				covered++
			}
		}
		if share := area / t.Cylinder.Area(e); area > 0 && (share < 0.03 || share > 0.2) {
			d.add(fmt.Sprintf("%s.%s.flow_area_mm2", path, [2]string{"suction", "discharge"}[k]), "5 to 10 % is usual; the number is per valve, effective, at full lift, not the port's bore. The valve maker's drawing states it.",
				"the valves open %.1f %% of the piston area", 100*share)
		}
	}
	if n := len(end.Suction) + len(end.Discharge); covered < n {
		d.add(path, "A leaking valve warms its own cover, and that is the only evidence that tells the valves of one group apart. Without it a finding names the group, and people open all its valves.",
			"%d of %d valves of %s have no cover temperature", n-covered, n, name)
	}
}

func (d *doubter) channels() {
	sk := d.sk
	used := map[string]bool{sk.Phase.Channel: true, sk.Phase.Index: true}
	stage := map[string]int{}
	for i := range sk.Throws {
		t := &sk.Throws[i]
		for e := range t.Ends {
			used[t.Ends[e].Pressure] = true
			stage[t.Ends[e].Pressure] = t.Stage
		}
		for _, a := range t.Accel {
			used[a] = true
		}
	}
	open := 0
	for _, c := range sk.Channels {
		path := sk.channelAt[c.ID]
		if !used[c.ID] {
			d.add(path, "It goes on the tape but nothing looks at it. Often a throw or an end names another channel by mistake.", "channel %s is not used", c.ID)
			continue
		}
		if c.Kind != Pressure {
			continue
		}
		if c.Passage == 0 {
			open++
		}
		n := stage[c.ID]
		if !sk.Process.Known || n > len(sk.Process.Stages) {
			continue
		}
		top := math.Min(c.Max, (c.VoltsFull-c.ZeroV)*c.Gain)
		if pd := sk.Process.Stages[n-1].Pd; top < 1.15*pd {
			d.add(path, "The cylinder overshoots the line by 5 to 15 % until the valve has opened, and a cut-off peak hides it and flattens the diagram. A flat top in the live chart shows it.",
				"channel %s reads to %.1f bar, the discharge line has %.1f bar", c.ID, top/1e5, pd/1e5)
		} else if top > 8*pd {
			d.add(path, "Zero drift is a share of the range, so a range far too wide makes suction pressure uncertain. Compare the certificate with the transmitter on the cylinder.",
				"channel %s reads to %.0f bar, the discharge line has %.1f bar", c.ID, top/1e5, pd/1e5)
		}
	}
	if open > 0 {
		d.add("channels", "A gauge passage rings at some hundred hertz, and uncorrected it shows openings up to 5° late. It is found from the spectrum on a loaded steady run, or computed from the passage's length.",
			"the passage resonance of %d pressure channels is not stated", open)
	}
}

func (d *doubter) steps() {
	sk := d.sk
	var named, anyIdle bool
	for i, s := range sk.Steps {
		working := 0
		for t := range sk.Throws {
			for e := range sk.Throws[t].Ends {
				if sk.Throws[t].Ends[e].Works && !s.Idle[sk.EndName(t, e)] {
					working++
				}
			}
		}
		path := fmt.Sprintf("load_steps[%d]", i)
		if working == 0 {
			d.add(path, "Then nothing is compressed and nothing can be judged in this step. That is right for a start-up step and wrong for any other.", "every end is idle in step %d", s.Code)
		}
		anyIdle = anyIdle || len(s.Idle) > 0
		named = named || len(s.Pocket) > 0 || len(s.Late) > 0
	}
	if len(sk.Steps) == 1 && !anyIdle && !named {
		d.add("load_steps", "An unloader or a pocket that is moved without a load step looks like a leak of every valve at once. Ask the operator how capacity is controlled; speed and bypass need no step.",
			"the machine has one load step only")
	}
}

func (d *doubter) duty() {
	sk := d.sk
	if !sk.Process.Known {
		d.add("process", "Rod loads, temperatures and opening angles could not be foreseen, and without live values the line works from the traces alone. Write the name plate's duty.",
			"the file gives no process values")
		return
	}
	for i, l := range sk.Process.Stages {
		path := fmt.Sprintf("process.stages[%d]", i)
		if l.Ps >= l.Pd {
			d.add(path, "A compressor does not compress downwards; the values are exchanged, or one is gauge and one absolute. The tag names of the transmitters tell.",
				"suction pressure (%.2f bar) is not below discharge pressure (%.2f bar)", l.Ps/1e5, l.Pd/1e5)
			continue
		}
		if i > 0 {
			if before := sk.Process.Stages[i-1].Pd; l.Ps > before*1.001 || l.Ps < 0.8*before {
				d.add(path, "Between stages the gas loses a few per cent in coolers and pipes, so suction should lie just under the discharge of the stage before. Look for gauge beside absolute.",
					"suction of stage %d is %.2f bar, stage %d delivers %.2f bar", i+1, l.Ps/1e5, i, before/1e5)
			}
		}
		if l.Pd/l.Ps > 6 {
			d.add(path, "One stage rarely does more than 4, because of heat. Often the suction pressure is gauge where absolute is meant.", "a pressure ratio of %.1f", l.Pd/l.Ps)
		}
		g, err := d.duties[i].gas, d.duties[i].err
		if err != nil {
			d.add(path, "Its volumes and temperatures cannot be foreseen at these values. Check pressure, temperature and composition.", "the gas cannot be computed: %v", err)
			continue
		}
		if g.Wet {
			d.add(path, "Behind a scrubber that is usual, and the numbers here hold. Drops that get past it wash oil away and slam valves: look at the drain of the suction bottle.",
				"the gas is saturated with water at suction: some of it condenses")
		}
		limit, what := hotC, "150 °C"
		if g.M <= hydrogenRich {
			limit, what = hotHydrogenC, "135 °C (hydrogen-rich)"
		}
		if td := g.T2s - 273.15; td > limit {
			d.add(path, "Valves, rings and oil age fast above that, and the real gas leaves hotter still. The discharge thermometer shows it, usually a little too low.",
				"loss-free discharge temperature %.0f °C, over %s", td, what)
		}
		if !math.IsNaN(l.Td) && l.Td < g.T2s-5 {
			d.add(path, "Gas cannot leave cooler than a loss-free compression makes it, save by cooling, which takes a few kelvin. The thermometer stands too far away, or a pressure or the gas is wrong.",
				"t_discharge_c is %.0f °C, loss-free compression gives %.0f °C", l.Td-273.15, g.T2s-273.15)
		}
	}
	flow := make([]float64, len(sk.Process.Stages)+1)
	for i := range sk.Throws {
		if t := sk.Throws[i].Stage; t < len(flow) {
			flow[t] += d.load(i)
		}
	}
	for n := 2; n < len(flow); n++ {
		if a, b := flow[n-1], flow[n]; a > 0 && b > 0 && math.Abs(b/a-1) > 0.15 {
			d.add(fmt.Sprintf("process.stages[%d]", n-1), "What one stage delivers the next must take, save a side stream, so the pressure between them settles where both agree. Compare bores, clearances and the pressure between the stages.",
				"at these pressures stage %d moves %.0f kg/h and stage %d %.0f kg/h", n-1, a*3600, n, b*3600)
		}
	}
}

// load doubts rod loads, reversal and delivery of a throw, over all load steps, and gives its flow in the first one,
// kg/s, 0 when it is not known.
func (d *doubter) load(i int) (flow float64) {
	sk := d.sk
	at := d.duties[sk.Throws[i].Stage-1]
	if at.err != nil {
		return 0 // said once, at the stage
	}
	for k, s := range sk.Steps {
		path := fmt.Sprintf("load_steps[%d]", k)
		it := sk.ideal(i, s, at.line, at.gas)
		if k == 0 {
			flow = it.flow
		}
		id := sk.Throws[i].ID
		d.rated(path, id, s, it)
		loaded := false
		for e := range it.ends {
			loaded = loaded || (it.ends[e].works && !it.ends[e].idle)
		}
		if loaded && !it.pin.OK(crank.LeastReversalDeg, crank.LeastReversalShare) {
			d.add(path, "A pin that is pressed to one side all turn gets no oil and fails within hours. Makers limit such steps in speed and pressure: check the masses and the list of allowed steps.",
				"pin load of %s in step %d reverses for %.0f° and %.1f %% only", id, s.Code, it.pin.Longest, 100*it.pin.Share)
		}
		for e, end := range it.ends {
			if end.works && !end.idle && !end.delivers() {
				d.add(path, "The clearance takes back all the gas, so the end works on its own gas and gets hot. Compare pocket, clearance and pressure ratio with the performance sheet.",
					"%s delivers nothing in step %d", sk.EndName(i, e), s.Code)
			}
		}
	}
	return flow
}

func (d *doubter) edges() {
	if host, _, err := net.SplitHostPort(d.sk.Panel.Listen); err == nil && host != "localhost" {
		if ip := net.ParseIP(host); ip == nil || !ip.IsLoopback() {
			d.add("panel.listen", "Everybody on that network can then read the page, and it asks for no password. The site's network rules say whether that is wanted.",
				"the page listens on %s", d.sk.Panel.Listen)
		}
	}
	whole, back := d.sk.tapeHours()
	if whole > 0 && whole < 1 {
		d.add("tape.max_gb", "An alarm that comes up slowly finds its beginning already overwritten. The check prints how long the tape lasts.", "the tape holds %.2g hours", whole)
	}
	t := &d.sk.Tape
	if t.Thin.OneIn == 0 {
		return
	}
	const why = "Thinning makes room to look back further, and here it makes none. Compare the hours that the check prints."
	switch {
	case back > 0 && back == whole:
		d.add("tape.thin.whole_h", why, "the tape is full after about %.3g h, before thinning begins", back)
	case t.MaxAge > 0 && t.MaxAge <= t.Thin.Whole:
		d.add("tape.thin.whole_h", why, "samples go after %.4g h, before thinning begins", t.MaxAge.Hours())
	case t.Thin.Hourly > 0 && t.MaxAge > 0 && t.MaxAge <= t.Thin.Hourly:
		d.add("tape.thin.hourly_after_h", why, "samples go after %.4g h, before they are thinned to a minute an hour", t.MaxAge.Hours())
	}
}
