package skid

import (
	"math"
	"strings"
)

func (p *page) sampling(sk *Skid) {
	p.title("Sampling")
	if sk.Rate <= 0 {
		p.table([]string{"rate not stated: it comes from the source"})
		return
	}
	rows := []string{row("rate", f("%s samples/s per channel", short(sk.Rate)))}
	m, seen := sk.Machine, map[float64]bool{}
	for _, rpm := range []float64{m.MinRPM, m.RatedRPM, m.MaxRPM} {
		if !seen[rpm] {
			seen[rpm] = true
			per := sk.Rate / (rpm * 6)
			rows = append(rows, row(f("at %s rpm", short(rpm)), f("%.1f samples per degree, %.1f per grid step of %s°; pressures to %.1f kHz", per, per*sk.Detection.GridDeg, short(sk.Detection.GridDeg), sk.PressureBand(rpm)/1e3)))
		}
	}
	d := sk.Detection
	rows = append(rows, row("bands", f("impacts %s to %s Hz, leak noise %s to %s Hz", short(d.ImpactBand[0]), short(d.ImpactBand[1]), short(d.LeakBand[0]), short(d.LeakBand[1]))),
		row("evidence", f("blocks of %d turns; a baseline wants %d turns", d.BlockTurns, d.LearnTurns)))
	p.table(rows)
}

func (p *page) channels(sk *Skid) {
	p.title("Channels")
	rows := []string{row("input", "id", "kind", "scale", "at 0 V", "at full scale", "believed", "gauge passage")}
	for _, c := range sk.Channels {
		value := func(v float64) string { // v in SI
			switch c.Kind {
			case Pressure:
				return f("%.4g", v/1e5)
			case Acceleration:
				return f("%.4g", v/standardGravity)
			}
			return f("%.4g", v)
		}
		unit, scale, passage := "V", "1 V/V", ""
		switch c.Kind {
		case Pressure:
			unit, scale = "bar abs", f("%.4g mV/bar, 0 bar abs at %.4g V", 1e8/c.Gain, c.ZeroV)
			passage = known(c.Passage, "%.4g Hz")
		case Acceleration:
			unit, scale = "g", f("%.4g mV/g", 1e3*standardGravity/c.Gain)
		}
		rows = append(rows, row(f("%d", c.Input), c.ID, string(c.Kind), scale, value(0-c.ZeroV*c.Gain)+" "+unit,
			f("%s %s at %s V", value((c.VoltsFull-c.ZeroV)*c.Gain), unit, short(c.VoltsFull)),
			f("%s to %s %s", value(c.Min), value(c.Max), unit), passage))
	}
	p.table(rows)
}

func (p *page) edges(sk *Skid) {
	p.title("Limits, record and messages")
	var rows []string
	for _, l := range sk.Limits {
		bound := ""
		if !math.IsNaN(l.High) {
			bound += " above " + short(l.High)
		}
		if !math.IsNaN(l.Low) {
			bound += " below " + short(l.Low)
		}
		rows = append(rows, row("limit", f("%s of %s%s: %s after %s; off after %s back by %s", l.Measure, l.Subject, bound, l.Severity, l.OnDelay, l.OffDelay, short(l.Deadband))+manner(l)+from(l)))
	}
	if len(sk.Limits) == 0 {
		rows = append(rows, row("limits", "none; findings come from the baseline"))
	}
	tape := f("at most %.4g GB and %.4g h", float64(sk.Tape.MaxBytes)/1e9, sk.Tape.MaxAge.Hours())
	_, back := sk.tapeHours()
	if back > 0 {
		tape += f("; full after about %.3g h (3 bytes a sample, before packing)", back)
	}
	rows = append(rows, row("tape", tape))
	if h := sk.Tape.Thin; h.OneIn > 0 {
		thin := f("whole for %.4g h, then one second in %d", h.Whole.Hours(), h.OneIn)
		if h.Hourly > 0 {
			thin += f(", after %.4g h the first minute of each hour", h.Hourly.Hours())
		}
		rows = append(rows, row("", thin))
	}
	rows = append(rows,
		row("clips", f("%s before to %s after an alarm, %.4g GB in all", sk.Tape.Pre, sk.Tape.Post, float64(sk.Tape.ClipBytes)/1e9)))
	if u := sk.Uplink; u.Broker != "" {
		rows = append(rows, row("uplink", f("%s as %s, topics %s/%s/…", u.Broker, u.ClientID, u.Root, sk.ID)),
			row("", f("features every %s, health every %s", u.FeaturesEvery, u.HealthEvery)))
		if u.Dialect == DialectSparkplug {
			said := f("Sparkplug B: edge node %s of group %s, a device for each throw", u.Sparkplug.Node, u.Sparkplug.Group)
			if u.Sparkplug.PrimaryHost != "" {
				said += f("; says nothing while the primary host %s is away", u.Sparkplug.PrimaryHost)
			}
			rows = append(rows, row("", said))
		}
		if len(u.Commands) > 0 {
			rows = append(rows, row("", f("the control room may order: %s; the broker's access list must let nobody else write to %s/%s/command",
				strings.Join(u.Commands, ", "), u.Root, sk.ID)))
		}
	} else {
		rows = append(rows, row("uplink", "none"))
	}
	if sk.Panel.Listen == "" {
		rows = append(rows, row("page", "none"))
	} else {
		rows = append(rows, row("page", "http://"+sk.Panel.Listen))
	}
	p.table(rows)
}

func (p *page) defaults(sk *Skid) {
	if len(sk.defaulted) == 0 {
		return
	}
	p.title("Left out of the file, so taken")
	p.table(sk.defaulted)
}
