package uplink

import (
	"encoding/json"
	"slices"
	"strings"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/wire"
)

// The metrics of the node:
//
//	Alarms/<subject>/<kind>   Int32: 0 none, 1 advisory, 2 alert, 3 danger, at the time of the transition; the state, the
//	                          transition's id, the operator's sentence and the rest are its properties
//	Alarms/worst_severity     Int32, of what stands
//	Health/…                  what the daemon knows of itself, as in the JSON message
//	Channels/<channel>        String: the channel's state; fault and reason are its properties
//	Properties/…              constants
//
// and of a device, which is a throw:
//
//	turn, duty, speed_rpm     of the newest turn that was sent
//	Measures/<part>/<name>    Double, with the unit in the name; null when it cannot be known
//
// A dot of a subject is a slash here: t1.he.suction is t1/he/suction. What stands under Alarms belongs to the node and
// not to its throw: an alarm must not go stale because a throw cannot be heard any more.
const (
	alarmFolder = "Alarms/"
	worstName   = alarmFolder + "worst_severity"
)

func folders(s string) string { return strings.ReplaceAll(s, ".", "/") }

// alarmName is the metric of an alarm point. Keys are <subject>/<kind>, or <subject>/<measure>/high of a limit.
func alarmName(key string) string {
	subject, kind, _ := strings.Cut(key, "/")
	return alarmFolder + folders(subject) + "/" + kind
}

// alarmKey is the way back, with slashes for dots: good for nothing but alarmName.
func alarmKey(name string) (string, bool) {
	key, is := strings.CutPrefix(name, alarmFolder)
	return key, is && name != worstName
}

func alarmOf(payload []byte) (a wire.Alarm, ok bool) {
	return a, json.Unmarshal(payload, &a) == nil && a.Key != ""
}

func severityOf(a *wire.Alarm) int32 {
	var s alarm.Severity
	if s.UnmarshalText([]byte(a.Severity)) != nil {
		return 0
	}
	return int32(s)
}

// standingSeverity is that of a point which asks something of a person.
func standingSeverity(a *wire.Alarm) (int32, bool) {
	var st alarm.State
	if st.UnmarshalText([]byte(a.To)) != nil || !st.Open() {
		return 0, false
	}
	return severityOf(a), true
}

// normalAlarm is a point of which nothing stands; when it became so is not at hand.
func normalAlarm(key string, at time.Time) sparkplug.Metric {
	return sparkplug.Metric{Name: alarmName(key), Type: sparkplug.Int32, Value: int32(0), At: at,
		Props: []sparkplug.Property{{Key: "state", Type: sparkplug.String, Value: alarm.Normal.String()}}}
}

func alarmMetric(a *wire.Alarm, historical bool) sparkplug.Metric {
	m := sparkplug.Metric{Name: alarmName(a.Key), Type: sparkplug.Int32, Value: severityOf(a), At: a.At, Historical: historical}
	text := func(key, s string) {
		if s != "" {
			m.Props = append(m.Props, sparkplug.Property{Key: key, Type: sparkplug.String, Value: s})
		}
	}
	text("state", a.To)
	if a.ID > 0 {
		m.Props = append(m.Props, sparkplug.Property{Key: "id", Type: sparkplug.UInt64, Value: a.ID})
	}
	text("journal", a.Journal)
	text("key", a.Key)
	text("from", a.From)
	text("was", a.Was)
	text("sentence", a.Sentence)
	text("by", a.By)
	text("note", a.Note)
	text("clip", a.Clip)
	m.Props = append(m.Props, sparkplug.Property{Key: "turn", Type: sparkplug.Int64, Value: a.Turn})
	if a.Order > 0 {
		m.Props = append(m.Props, sparkplug.Property{Key: "first_up_order", Type: sparkplug.Int32, Value: int32(a.Order)})
	}
	for _, b := range []struct {
		key string
		is  bool
	}{{"flood", a.Flood}, {"test", a.Test}} {
		if b.is {
			m.Props = append(m.Props, sparkplug.Property{Key: b.key, Type: sparkplug.Boolean, Value: true})
		}
	}
	if !a.Renewed.IsZero() {
		m.Props = append(m.Props, sparkplug.Property{Key: "evidence_at", Type: sparkplug.DateTime, Value: a.Renewed})
	}
	text("caution", a.Caution)
	return m
}

// measureName is the metric of a throw's measure.
func measureName(throw, subject, name string) string {
	part := strings.TrimPrefix(strings.TrimPrefix(subject, throw), ".")
	if part != "" {
		part = folders(part) + "/"
	}
	return "Measures/" + part + name
}

// throwMetrics are those of a features message; of the names that are known already, those that are not in it are null.
func throwMetrics(f *wire.Features, known []string) []sparkplug.Metric {
	at := f.At
	none := at.IsZero()
	m := []sparkplug.Metric{{Name: "turn", Type: sparkplug.Int64, At: at}, {Name: "duty", Type: sparkplug.String, At: at}, {Name: "speed_rpm", Type: sparkplug.Double, At: at}}
	if !none && f.Turn > 0 {
		m[0].Value = f.Turn
	}
	if f.Duty != "" {
		m[1].Value = f.Duty
	}
	if f.RPM != nil {
		m[2].Value = *f.RPM
	}
	said := map[string]float64{}
	var fresh []string
	for subject, vals := range f.Values {
		for name, v := range vals {
			n := measureName(f.Throw, subject, name)
			said[n] = v
			if !slices.Contains(known, n) {
				fresh = append(fresh, n)
			}
		}
	}
	slices.Sort(fresh)
	for _, n := range slices.Concat(known, fresh) {
		if !strings.HasPrefix(n, "Measures/") {
			continue
		}
		x := sparkplug.Metric{Name: n, Type: sparkplug.Double, At: at}
		if v, ok := said[n]; ok {
			x.Value = v
		}
		m = append(m, x)
	}
	return m
}

// healthMetrics are those of a health message; without values when nothing is known yet.
func healthMetrics(h *wire.Health, unknown bool) (out []sparkplug.Metric) {
	put := func(name string, t sparkplug.Type, v any) {
		if unknown {
			v = nil
		}
		out = append(out, sparkplug.Metric{Name: "Health/" + name, Type: t, Value: v, At: h.At})
	}
	put("state", sparkplug.String, h.State)
	put("line", sparkplug.String, h.Line)
	var rpm any
	if h.RPM != nil {
		rpm = *h.RPM
	}
	put("speed_rpm", sparkplug.Double, rpm)
	put("heartbeat_s", sparkplug.Double, h.Heartbeat)
	put("category", sparkplug.String, h.Category)
	put("category_reason", sparkplug.String, h.CategoryWhy)
	put("turns", sparkplug.Int64, h.Turns)
	put("turns_not_valid", sparkplug.Int64, h.BadTurns)
	put("baseline", sparkplug.Boolean, h.Learned)
	put("learning_turns_left", sparkplug.Int64, int64(h.LearnLeft))
	put("samples_lost", sparkplug.Int64, h.SamplesLost)
	put("blocks_dropped_before_line", sparkplug.Int64, h.QueueFull)
	put("tape_bytes", sparkplug.Int64, h.Tape.Bytes)
	put("tape_blocks_dropped", sparkplug.Int64, h.Tape.Dropped)
	put("clips", sparkplug.Int64, int64(h.Tape.Clips))
	put("trouble", sparkplug.String, strings.Join(h.Trouble, "\n"))
	for i := range h.Channels {
		c := &h.Channels[i]
		m := ChannelMetric(c.ID)
		m.Value, m.At = c.State, h.At
		for _, p := range [][2]string{{"place", c.Place}, {"fault", c.Fault}, {"reason", c.Reason}} {
			if p[1] != "" {
				m.Props = append(m.Props, sparkplug.Property{Key: p[0], Type: sparkplug.String, Value: p[1]})
			}
		}
		out = append(out, m)
	}
	return out
}

// ChannelMetric is the metric of a channel's state, without a value.
func ChannelMetric(id string) sparkplug.Metric {
	return sparkplug.Metric{Name: "Channels/" + folders(id), Type: sparkplug.String}
}

// unheard tells whether nothing of a throw can be known: the shaft reference is lost, or every one of its channels has
// failed.
func unheard(h *wire.Health, throw string) bool {
	if h.State == "lost" {
		return true
	}
	channels, failed := 0, 0
	for i := range h.Channels {
		c := &h.Channels[i]
		if c.Place == throw || strings.HasPrefix(c.Place, throw+".") {
			channels++
			if c.State == "failure" {
				failed++
			}
		}
	}
	return channels > 0 && failed == channels
}
