package station

import (
	"maps"
	"math"
	"runtime/debug"
	"slices"
	"strings"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/frame"
	"lapwing/internal/panel"
	"lapwing/internal/sensor"
	"lapwing/internal/wire"
)

// scrape gathers families; every series carries the skid.
type scrape struct {
	skid panel.Label
	out  []panel.Family
}

// Metrics is what a scrape of the page's /metrics is told: the newest pictures of the line and of the stores. The line does
// not wait for it and does no work for it. Counters count since the start of the process where nothing else is said.
func (s *Station) Metrics() []panel.Family {
	c := &scrape{skid: panel.Label{Name: "skid", Value: s.sk.ID}}
	n := s.Now()
	c.daemon(s, n)
	if p := s.meter.shown.Load(); p != nil {
		c.line(p)
		c.machine(s, p)
	}
	c.capture(s)
	c.channels(n)
	c.alarms(s, n)
	c.tape(s)
	c.ledger(s)
	c.uplink(s)
	return c.out
}

func (c *scrape) add(counter bool, name, help string, series []panel.Series) {
	for i := range series {
		series[i].Labels = append([]panel.Label{c.skid}, series[i].Labels...)
	}
	c.out = append(c.out, panel.Family{Name: "lapwing_" + name, Help: help, Counter: counter, Series: series})
}

func (c *scrape) gauge(name, help string, series ...panel.Series)   { c.add(false, name, help, series) }
func (c *scrape) counter(name, help string, series ...panel.Series) { c.add(true, name, help, series) }

// value is a series with pairs of label names and values.
func value(v float64, pairs ...string) panel.Series {
	s := panel.Series{Value: v}
	for i := 0; i+1 < len(pairs); i += 2 {
		s.Labels = append(s.Labels, panel.Label{Name: pairs[i], Value: pairs[i+1]})
	}
	return s
}

func count[T ~int | ~int64 | ~uint64](n T, pairs ...string) panel.Series {
	return value(float64(n), pairs...)
}

func yes(b bool, pairs ...string) panel.Series {
	if b {
		return value(1, pairs...)
	}
	return value(0, pairs...)
}

// stamp is a Unix time; a zero time is not known.
func stamp(t time.Time, pairs ...string) panel.Series {
	if t.IsZero() {
		return value(math.NaN(), pairs...)
	}
	return value(float64(t.UnixNano())/1e9, pairs...)
}

// stateSet is one series for each state that there is, 1 for the present one.
func stateSet(present string, all []string, pairs ...string) (out []panel.Series) {
	for _, st := range all {
		out = append(out, yes(st == present, append(slices.Clone(pairs), "state", st)...))
	}
	return out
}

// named lists the names of an enumeration from its zero value to last.
func named[T interface {
	~uint8
	String() string
}](last T) (out []string) {
	for v := range int(last) + 1 {
		out = append(out, T(v).String())
	}
	return out
}

var (
	categories = named(sensor.Failure)
	shafts     = named(frame.StateCoasting)
	duties     = named(duty.OutOfRange)
	points     = named(alarm.OutOfService)
	severities = named(alarm.Danger)
)

func (c *scrape) daemon(s *Station, n *wire.Now) {
	version, goVersion := "unknown", "unknown"
	if b, ok := debug.ReadBuildInfo(); ok {
		version, goVersion = b.Main.Version, b.GoVersion
		for _, kv := range b.Settings {
			if kv.Key == "vcs.revision" {
				version = strings.TrimSpace(version + " " + kv.Value)
			}
		}
	}
	c.gauge("build_info", "Version of this monitor.", value(1, "version", version, "goversion", goVersion))
	c.gauge("health_state", "Category of the monitor as a whole by NAMUR NE 107: 1 for the present one.",
		stateSet(sensor.Category(s.meter.said.Load()).String(), categories)...)
	c.gauge("health_troubles", "Plain sentences in the health message that ask for somebody's attention.", count(len(n.Health.Trouble)))
	c.gauge("skid_snapshot_timestamp_seconds", "Sample time of what page and health show.", stamp(n.At))
	if ns := s.meter.heard.Load(); ns != 0 {
		c.gauge("line_last_block_timestamp_seconds", "Wall clock when the newest block was through the line: it stands still when the line is dead or the source silent.", value(float64(ns)/1e9))
	}
	c.counter("line_processed_samples_total", "Samples per channel that went through the line.", count(s.progress.Load()))
	c.counter("line_dropped_blocks_total", "Blocks that the line had no room for; the tape has them.", count(s.dropped.Load()))
	if q := s.meter.queue.Load(); q != nil {
		c.gauge("line_queue_blocks", "Blocks that wait for the line.", count(len(*q)))
		c.gauge("line_queue_limit_blocks", "Blocks that may wait for the line.", count(cap(*q)))
	}
	c.log(s)
}

func (c *scrape) line(p *measured) {
	c.counter("line_samples_seconds_total", "Time that the samples through the line took to be taken.", value(float64(p.count.Samples)/p.rate))
	c.counter("line_busy_seconds_total", "Time in which the compute goroutine was at work, by what it did: line (frames to alarms), keep (journal, snapshot, messages), state (copies of the whole state for clips).",
		value(p.busy.line.Seconds(), "part", "line"), value(p.busy.keep.Seconds(), "part", "keep"), value(p.busy.states.Seconds(), "part", "state"))
	c.gauge("line_load_ratio", "Busy time over the time the samples took, last minute of samples. Above 1 the line falls behind.", value(p.minute.load))
	c.gauge("line_load_worst_ratio", "The same of the slowest second within the last minute of samples.", value(p.minute.worst))
	c.gauge("line_queue_most_blocks", "Most blocks that waited for the line within the last minute of samples.", count(p.minute.queue))
	c.counter("samples_lost_total", "Samples per channel that never came through the line: lost by the source, or dropped before the line.", count(p.count.Lost))
	c.counter("evidence_blocks_total", "Blocks of evidence that were judged.", count(p.count.Blocks))
	c.gauge("line_state_copies", "Copies of the line's whole state that are kept for clips.", count(p.states))
	c.gauge("line_state_bytes", "What they take in memory.", count(p.stateLen))
	if p.states > 0 {
		c.gauge("line_state_seconds", "Time that the newest copy took; the line waits for it.", value(p.stateDur.Seconds()))
		c.gauge("line_state_timestamp_seconds", "Sample time of the newest copy.", stamp(p.stateAt))
	}
	c.gauge("journal_unwritten_entries", "Entries of the alarm journal that are not on disk yet.", count(p.unsaid))
}

func (c *scrape) machine(s *Station, p *measured) {
	c.counter("turns_total", "Turns that ended, valid or not.", count(p.count.Turns))
	var bad []panel.Series
	for _, why := range slices.Sorted(maps.Keys(p.count.Reasons)) {
		bad = append(bad, count(p.count.Reasons[why], "reason", why))
	}
	c.counter("turns_invalid_total", "Turns that could not be measured, by reason.", bad...)
	c.gauge("shaft_state", "What the shaft reference shows: 1 for the present state.", stateSet(p.phase.State.String(), shafts)...)
	c.gauge("shaft_speed_rpm", "Speed; absent unless it is known.", value(p.phase.RPM))
	c.counter("phase_extra_pulses_total", "Pulses that were no marks.", count(p.phase.Extra))
	c.counter("phase_missing_marks_total", "Marks, or teeth, that did not come while the machine ran.", count(p.phase.Missing))
	c.counter("phase_unclear_pulses_total", "Pulses whose edge lay in lost samples.", count(p.phase.Unclear))
	var ds []panel.Series
	for i, d := range p.duty {
		ds = append(ds, stateSet(d.String(), duties, "throw", s.sk.Throws[i].ID)...)
	}
	c.gauge("throw_duty_state", "What the throw is doing: 1 for the present state. Turns in state steady or changing are judged.", ds...)
	c.gauge("baseline_in_force", "1 while a baseline is in force: otherwise nothing is judged by it.", yes(p.judging))
	if p.judging {
		c.gauge("baseline_version", "Number of the baseline in force; 0 when it is none of the stored ones.", count(p.baseline))
		c.gauge("baseline_created_timestamp_seconds", "When it was learnt.", stamp(p.created))
	}
	c.gauge("learning_turns_left", "Steady turns that a learning run still wants; 0 without one.", count(p.left))
	c.gauge("process_known", "1 while process values are known.", yes(p.known))
	if p.known {
		c.gauge("process_age_seconds", "Age of the oldest load step or line pressure in use.", value(p.age.Seconds()))
	}
}

func (c *scrape) channels(n *wire.Now) {
	var info, all []panel.Series
	for i := range n.Health.Channels {
		ch := &n.Health.Channels[i]
		throw, _, _ := strings.Cut(ch.Place, ".")
		info = append(info, value(1, "channel", ch.ID, "kind", ch.Kind, "place", ch.Place, "throw", throw))
		all = append(all, stateSet(ch.State, categories, "channel", ch.ID)...)
	}
	c.gauge("channel_info", "Channels in use, with what they measure and where.", info...)
	c.gauge("channel_state", "Category of the channel by NAMUR NE 107: 1 for the present one. In failure or out of specification it is not used.", all...)
}

func (c *scrape) alarms(s *Station, n *wire.Now) {
	type group struct{ state, severity string }
	have := map[group]int{}
	a := s.Alarms()
	for i := range a.Points {
		p := &a.Points[i]
		g := group{p.State, p.Severity}
		if p.Behind != "" {
			g.severity = p.Level
		}
		have[g]++
	}
	var all []panel.Series
	for _, st := range points {
		for _, sev := range severities {
			all = append(all, count(have[group{st, sev}], "state", st, "severity", sev))
		}
	}
	c.gauge("alarm_points", "Alarm points by state and severity; of a point that is shelved, suppressed or out of service the severity behind it.", all...)
	c.gauge("alarm_flood", "1 while more alarms come in than a person can follow.", yes(a.Flood))
	type found struct{ throw, grade string }
	grades := map[found]int{}
	for i := range n.Findings {
		throw, _, _ := strings.Cut(n.Findings[i].Subject, ".")
		grades[found{throw, n.Findings[i].Grade}]++
	}
	var fs []panel.Series
	for i := range s.sk.Throws {
		for _, sev := range severities[1:] {
			fs = append(fs, count(grades[found{s.sk.Throws[i].ID, sev}], "throw", s.sk.Throws[i].ID, "severity", sev))
		}
	}
	c.gauge("findings", "What the evidence says at present, by throw and grade.", fs...)
}
