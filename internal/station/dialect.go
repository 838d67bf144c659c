package station

import (
	"maps"
	"slices"

	"lapwing/internal/skid"
	"lapwing/internal/uplink"
	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// docBdSeq holds the number of the last connection in Sparkplug.
const docBdSeq = "sparkplug bdSeq"

// sparkplug is how the uplink speaks when the skid file asks for Sparkplug; nil: JSON.
func (s *Station) sparkplug() *uplink.Sparkplug {
	u := &s.sk.Uplink
	if u.Dialect != skid.DialectSparkplug {
		return nil
	}
	constant := func(name, v string) sparkplug.Metric {
		return sparkplug.Metric{Name: "Properties/" + name, Type: sparkplug.String, Value: v}
	}
	p := &uplink.Sparkplug{Group: u.Sparkplug.Group, Node: u.Sparkplug.Node, PrimaryHost: u.Sparkplug.PrimaryHost, Alarms: s.alarmKeys(), BdSeq: s.nextBdSeq,
		Known: []sparkplug.Metric{constant("skid", s.sk.ID), constant("name", s.sk.Name), constant("alarm_topic", s.topics.Alarm()), constant("caution", wire.Caution)}}
	for i := range s.sk.Channels {
		p.Known = append(p.Known, uplink.ChannelMetric(s.sk.Channels[i].ID))
	}
	layout := s.line.Layout()
	for i := range s.sk.Throws {
		d := uplink.SparkplugDevice{ID: s.sk.Throws[i].ID}
		for k := range layout {
			if layout[k].Throw == i {
				d.Measures = append(d.Measures, [2]string{layout[k].Subject, layout[k].Name})
			}
		}
		p.Devices = append(p.Devices, d)
	}
	return p
}

// alarmKeys lists the points that this skid file can raise: a host should know their names before they speak. One that
// is missing here is told by a new birth when it first comes.
func (s *Station) alarmKeys() (out []string) {
	for t := range s.sk.Throws {
		th := &s.sk.Throws[t]
		both := true
		for e := range th.Ends {
			if !th.Ends[e].Works {
				both = false
				continue
			}
			end := s.sk.EndName(t, e)
			for _, group := range []string{".suction", ".discharge"} {
				for _, kind := range []string{verdict.Leaking, verdict.ImpactingHard, verdict.OpeningLate, verdict.Fluttering} {
					out = append(out, end+group+"/"+kind)
				}
			}
			out = append(out, end+"/"+verdict.Clearance)
		}
		if both {
			out = append(out, th.ID+".rings/"+verdict.Leaking)
		}
		if th.Ends[1].Works {
			out = append(out, th.ID+".packing/"+verdict.Leaking)
		}
		out = append(out, th.ID+"/"+verdict.DeadCentre, th.ID+"/"+verdict.GasChanged)
	}
	for i := range s.sk.Channels {
		c := &s.sk.Channels[i]
		out = append(out, c.ID+"/"+sensorKind)
		switch c.Kind {
		case skid.Pressure:
			out = append(out, c.ID+"/"+verdict.PressureZero)
		case skid.Acceleration:
			out = append(out, c.ID+"/"+verdict.AccelGain)
		}
	}
	out = append(out, readingsKey)
	return append(out, slices.Sorted(maps.Keys(AlarmTiming(s.sk).Points))...)
}

// nextBdSeq counts connections from 0 to 255 and round again, also over restarts.
func (s *Station) nextBdSeq() (uint8, error) {
	var last uint8
	known, err := s.ledger.Doc(docBdSeq, &last)
	if err != nil {
		return 0, err
	}
	if known {
		last++
	}
	return last, s.ledger.PutDoc(docBdSeq, last)
}
