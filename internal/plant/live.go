package plant

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"lapwing/internal/skid"
)

// At gives the process values at a moment: base with everything that is read over Modbus in place of its own. A value
// that is missing, not believed or older than it may be is not known. Age is that of the oldest load step or pressure
// used; temperatures only have their own bound. While the load step is not known of a machine that has several, nothing
// is: clearances and what is normal depend on it, and the line reads both off the traces. The Process is the caller's own.
func (p *Poller) At(base skid.Process, now time.Time) skid.Process {
	out := skid.Process{Step: base.Step, Age: base.Age, Stages: slices.Clone(base.Stages)}
	nan := math.NaN()
	for len(out.Stages) < p.sk.Stages() {
		out.Stages = append(out.Stages, skid.Line{Ps: nan, Pd: nan, Ts: nan, Td: nan})
	}
	for id, k := range base.Covers {
		cover(&out, id, k)
	}
	for _, d := range p.devices {
		st := d.state.Load()
		for i := range d.Tags {
			t := &d.Tags[i]
			v, age, _, _ := current(t, &st.tags[i], st.link, now)
			switch t.What {
			case skid.PlantLoadStep:
				if !math.IsNaN(v) {
					out.Step = int(v)
				}
			case skid.PlantSuctionPressure:
				out.Stages[t.Stage].Ps = v
			case skid.PlantDischargePressure:
				out.Stages[t.Stage].Pd = v
			case skid.PlantSuctionTemperature:
				out.Stages[t.Stage].Ts = v
			case skid.PlantDischargeTemperature:
				out.Stages[t.Stage].Td = v
			case skid.PlantCover:
				cover(&out, t.Valve, v)
			}
			if !math.IsNaN(v) && (t.What == skid.PlantLoadStep || t.What == skid.PlantSuctionPressure || t.What == skid.PlantDischargePressure) {
				out.Age = max(out.Age, age)
			}
		}
	}
	if p.stepless(now) {
		for i := range out.Stages {
			out.Stages[i] = skid.Line{Ps: nan, Pd: nan, Ts: nan, Td: nan}
		}
		out.Covers, out.Age = nil, 0
	}
	out.Known = anyKnown(&out)
	return out
}

// stepless: of several load steps, it is not known which is in force.
func (p *Poller) stepless(now time.Time) bool {
	for _, d := range p.devices {
		st := d.state.Load()
		for i := range d.Tags {
			if t := &d.Tags[i]; t.What == skid.PlantLoadStep {
				v, _, _, _ := current(t, &st.tags[i], st.link, now)
				return math.IsNaN(v) && len(p.sk.Steps) > 1
			}
		}
	}
	return false
}

// cover sets a cover temperature, or takes it out.
func cover(p *skid.Process, valve string, k float64) {
	if math.IsNaN(k) {
		delete(p.Covers, valve)
		return
	}
	if p.Covers == nil {
		p.Covers = map[string]float64{}
	}
	p.Covers[valve] = k
}

func anyKnown(p *skid.Process) bool {
	if len(p.Covers) > 0 {
		return true
	}
	for _, l := range p.Stages {
		if !math.IsNaN(l.Ps) || !math.IsNaN(l.Pd) || !math.IsNaN(l.Ts) || !math.IsNaN(l.Td) {
			return true
		}
	}
	return false
}

// current gives a tag's value with its age, or NaN with the reason and since when.
func current(t *skid.ModbusTag, r *reading, link string, now time.Time) (v float64, age time.Duration, why string, since time.Time) {
	switch {
	case r.why != "":
		return math.NaN(), 0, r.why, r.since
	case r.at.IsZero():
		return math.NaN(), 0, link, time.Time{}
	}
	if age = max(0, now.Sub(r.at)); age > t.MaxAge {
		if link == "" {
			link = "too old"
		}
		return math.NaN(), age, link, r.at.Add(t.MaxAge)
	}
	return r.v, age, "", time.Time{}
}

// Troubles says in plain words which values are not used, of which device, why and since when.
func (p *Poller) Troubles(now time.Time) (out []string) {
	for _, d := range p.devices {
		st := d.state.Load()
		var whys []string
		values, begun := map[string][]string{}, map[string]time.Time{}
		for i := range d.Tags {
			_, _, why, since := current(&d.Tags[i], &st.tags[i], st.link, now)
			if why == "" {
				continue
			}
			if values[why] == nil {
				whys = append(whys, why)
				begun[why] = since
			}
			values[why] = append(values[why], d.Tags[i].Value)
			if since.Before(begun[why]) {
				begun[why] = since
			}
		}
		for _, why := range whys {
			when := "since the start"
			if t := begun[why]; !t.IsZero() {
				when = "since " + t.UTC().Format(time.RFC3339)
			}
			out = append(out, fmt.Sprintf("process values of %s (%s, unit %d) are not used %s: %s: %s", d.Name, d.URL, d.Unit, when, strings.Join(values[why], ", "), why))
		}
	}
	if p.stepless(now) {
		out = append(out, "process values: while the load step is not known, none of them is used; load step and pressures are read off the cylinders' traces")
	}
	return out
}
