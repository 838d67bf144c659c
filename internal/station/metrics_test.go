package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math"
	"net/http"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/frame"
	"lapwing/internal/panel/paneltest"
	"lapwing/internal/sensor"
	"lapwing/internal/wire"
)

// scraped reads the metrics over the page as a scraper does.
func scraped(t *testing.T, s *Station) (*paneltest.Metrics, string) {
	t.Helper()
	resp, err := http.Get(s.PageURL() + "metrics")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil || resp.StatusCode != http.StatusOK {
		t.Fatal(err, resp.Status)
	}
	m, err := paneltest.Read(string(b))
	if err != nil {
		t.Fatalf("%v\n%s", err, b)
	}
	return m, string(b)
}

// What a scrape says of a whole run is what the run's other records say: turns, samples, transitions, tape, outbox. It is
// scraped all the while, from elsewhere, and the last time when the source has ended and the page is still up.
func TestMetricsOfARun(t *testing.T) {
	r := recorded(t)
	turns, invalid := 0, map[string]int{}
	var s *Station
	var last *paneltest.Metrics
	var text string
	s, err := Open(Options{SkidFile: r.skid, State: t.TempDir(), Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Learn: takeLearn, Listen: "127.0.0.1:0",
		OnTurn: func(rec *wire.Turn) {
			if turns++; !rec.Valid {
				invalid[rec.Reason]++
			}
		},
		AtEnd: func(context.Context) { last, text = scraped(t, s) }})
	if err != nil {
		t.Fatal(err)
	}
	defer func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	}()
	ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
	defer cancel()
	over := make(chan struct{})
	looked := make(chan int)
	go func() {
		n := 0
		for {
			select {
			case <-over:
				looked <- n
				return
			default:
				_ = s.Metrics()
				n++
			}
		}
	}()
	err = errors.Join(s.Run(ctx), ctx.Err())
	close(over)
	if n := <-looked; err != nil || last == nil || n == 0 {
		t.Fatal(err, last != nil, n)
	}
	ended := s.line.Count()
	for name, want := range map[string]float64{
		"lapwing_line_processed_samples_total": float64(ended.Samples),
		"lapwing_journal_transitions_total":    float64(s.ledger.Stats().LastJournal),
		"lapwing_line_dropped_blocks_total":    0,
		"lapwing_baseline_in_force":            1, "lapwing_baseline_version": 1, "lapwing_process_known": 1, "lapwing_tape_up": 1,
		"lapwing_health_state": 1, "lapwing_shaft_state": 1, // one of their states is the present one
		"lapwing_throw_duty_state": float64(len(r.sk.Throws)), "lapwing_channel_state": float64(len(r.sk.Channels)), "lapwing_channel_info": float64(len(r.sk.Channels)),
		"lapwing_alarm_points": float64(len(s.Alarms().Points)),
	} {
		if got, n := last.Sum(name); n == 0 || got != want {
			t.Errorf("%s is %v in %d series, want %v", name, got, n, want)
		}
	}
	// The last turns come out when the stream is flushed: they are not in the picture.
	if got, n := last.Sum("lapwing_turns_total"); n != 1 || got > float64(turns) || got < float64(turns)-4 {
		t.Errorf("%v turns of %d", got, turns)
	}
	bad := 0
	for _, n := range invalid {
		bad += n
	}
	if got, n := last.Sum("lapwing_turns_invalid_total"); n == 0 || got > float64(bad) || got < float64(bad)-4 || got < 1 {
		t.Errorf("%v invalid turns of %d: %v", got, bad, invalid)
	}
	if got, n := last.Sum("lapwing_samples_lost_total"); n != 1 || got != float64(ended.Lost) || got == 0 {
		t.Errorf("%v samples lost of %d", got, ended.Lost)
	}
	busy, _ := last.Sum("lapwing_line_busy_seconds_total")
	took, _ := last.Sum("lapwing_line_samples_seconds_total")
	if load, n := last.Sum("lapwing_line_load_ratio"); n != 1 || !(load > 0) || load > busy/(took-1.1) { // whole seconds only; less than a minute: of the whole run
		t.Errorf("load %v, busy %v s of %v s", load, busy, took)
	}
	if worst, _ := last.Sum("lapwing_line_load_worst_ratio"); worst < load(last) {
		t.Errorf("the slowest second is faster than the middle: %v", worst)
	}
	for _, name := range []string{"lapwing_tape_written_bytes_total", "lapwing_tape_kept_bytes_total", "lapwing_tape_commits_total", "lapwing_tape_oldest_timestamp_seconds", "lapwing_outbox_messages", "lapwing_line_state_copies", "lapwing_line_state_bytes"} {
		if got, _ := last.Sum(name); !(got > 0) && !(name == "lapwing_tape_oldest_timestamp_seconds" && s.info.Start.IsZero()) {
			t.Errorf("%s is %v", name, got)
		}
	}
	if n := strings.Count(text, "\n"); n > 700 {
		t.Errorf("%d lines for a machine of two throws", n)
	}
	for key := range last.Series {
		if strings.HasPrefix(key, "lapwing_") && last.Labels[key]["skid"] != r.sk.ID {
			t.Errorf("%s does not name the skid", key)
		}
	}
	if h := s.Now().Health; h.Category == "" || h.Load == nil || len(h.BadBy) == 0 || h.QueueLimit != queueLen {
		t.Errorf("health says nothing of itself: %+v", h)
	}
}

func load(m *paneltest.Metrics) float64 {
	v, _ := m.Sum("lapwing_line_load_ratio")
	return v
}

func TestDaemonCategory(t *testing.T) {
	good := condition{shaft: frame.StateRunning, turns: 900, judging: true, lately: minute{load: 0.3, turns: 700, invalid: 20},
		channels: []wire.Channel{{ID: "ph", Kind: "phase", State: "good"}, {ID: "p1", Kind: "pressure", State: "good"}, {ID: "p2", Kind: "pressure", State: "good"}, {ID: "a1", Kind: "acceleration", State: "good"}}}
	set := func(c *condition, state string, ids ...string) {
		c.channels = append([]wire.Channel(nil), c.channels...)
		for i := range c.channels {
			for _, id := range ids {
				if c.channels[i].ID == id {
					c.channels[i].State = state
				}
			}
		}
	}
	for _, c := range []struct {
		name string
		set  func(c *condition)
		want sensor.Category
		why  string
	}{
		{"all well", func(*condition) {}, sensor.Good, ""},
		{"machine at rest", func(c *condition) { c.shaft, c.turns = frame.StateStandstill, 0 }, sensor.Good, ""},
		{"silent source", func(c *condition) { c.silent = 7 * time.Second }, sensor.Failure, "no samples have come for 7s"},
		{"pick-up lost", func(c *condition) { c.shaft = frame.StateLost }, sensor.Failure, "marks"},
		{"phase channel", func(c *condition) { set(c, "failure", "ph") }, sensor.Failure, "shaft reference ph"},
		{"all pressures", func(c *condition) { set(c, "failure", "p1", "p2") }, sensor.Failure, "no cylinder pressure"},
		{"journal not written", func(c *condition) { c.unsaid = 3 }, sensor.Failure, "3 entries of the journal"},
		{"the gravest first", func(c *condition) { c.unsaid, c.judging = 3, false }, sensor.Failure, "3 entries"},
		{"no baseline", func(c *condition) { c.judging = false }, sensor.FunctionCheck, "no baseline"},
		{"learning", func(c *condition) { c.judging, c.learning = false, true }, sensor.FunctionCheck, "learning run"},
		{"a part learnt anew", func(c *condition) { c.learning = true }, sensor.Good, ""},
		{"just begun", func(c *condition) { c.turns, c.shaft = 0, frame.StateUnknown }, sensor.FunctionCheck, "no turn"},
		{"blocks dropped", func(c *condition) { c.lately.dropped = 4 }, sensor.OutOfSpecification, "4 blocks"},
		{"falls behind", func(c *condition) { c.lately.load = 1.2 }, sensor.OutOfSpecification, "1.20 times"},
		{"one pressure", func(c *condition) { set(c, "out of specification", "p2") }, sensor.OutOfSpecification, "channel p2 is in out of specification"},
		{"turns not valid", func(c *condition) { c.lately.invalid = 400 }, sensor.OutOfSpecification, "400 of the last 700 turns"},
		{"process values", func(c *condition) { c.stuck = true }, sensor.OutOfSpecification, "process values stand still"},
		{"a channel wants a look", func(c *condition) { set(c, "maintenance required", "a1") }, sensor.MaintenanceRequired, "channel a1"},
		{"a disk in trouble", func(c *condition) { c.troubles = []string{"the disk refused 2s"} }, sensor.MaintenanceRequired, "the disk refused 2s"},
	} {
		t.Run(c.name, func(t *testing.T) {
			k := good
			c.set(&k)
			if got, why := k.category(); got != c.want || !strings.Contains(why, c.why) || (why == "") != (got == sensor.Good) {
				t.Errorf("%s: %q, want %s: %q", got, why, c.want, c.why)
			}
		})
	}
}

// A source that gives nothing is said to, in health and metrics, though no turn comes to say it with.
func TestSilentSourceIsAFailure(t *testing.T) {
	s := staffed(t)
	if h := s.health(s.lineNow()); h.Category != "function check" {
		t.Errorf("category %q: %s", h.Category, h.CategoryWhy)
	}
	s.heard = s.heard.Add(-time.Minute)
	h := s.health(s.lineNow())
	if h.Category != "failure" || !strings.Contains(strings.Join(h.Trouble, "\n"), "no samples have come for 1m") {
		t.Errorf("category %q, troubles %q", h.Category, h.Trouble)
	}
	for _, f := range s.Metrics() {
		for _, x := range f.Series {
			if f.Name == "lapwing_health_state" && (x.Value == 1) != (x.Labels[1].Value == "failure") {
				t.Errorf("%v", x)
			}
			if f.Name == "lapwing_alarm_points" && x.Labels[1].Value == alarm.Unacked.String() && x.Labels[2].Value == "alert" && x.Value != 2 {
				t.Errorf("two alerts stand: %v", x)
			}
		}
	}
}

// The figures of the last minute are those of the last 59 whole seconds of samples.
func TestMeterForgets(t *testing.T) {
	m := &meter{}
	for i := range 150 {
		m.seconds[m.next] = second{samples: 1000, busy: time.Duration(i) * time.Millisecond, queue: i % 7, turns: 15, valid: 14, dropped: int64(i / 149)}
		m.next, m.full = (m.next+1)%60, min(m.full+1, 59)
		m.seconds[m.next] = second{} // the one in hand
	}
	got := m.lately(1000)
	got.load, got.worst = math.Round(got.load*1e9)/1e9, math.Round(got.worst*1e9)/1e9
	if want := (minute{load: 0.120, worst: 0.149, queue: 6, turns: 59 * 15, invalid: 59, dropped: 1}); got != want { // the seconds 91 to 149
		t.Errorf("got %+v, want %+v", got, want)
	}
	if got := new(meter).lately(1000); got != (minute{}) {
		t.Errorf("out of nothing: %+v", got)
	}
}

// A trouble that lasts is written at once, after a minute, two more, four … up to an hour, each time with how often it came;
// another trouble, and every line that is no trouble, passes.
func TestLogOfADayWithoutABroker(t *testing.T) {
	var out strings.Builder
	now := time.Unix(1e9, 0)
	log, l := thin(slog.NewTextHandler(&out, nil), func() time.Time { return now })
	for i := range 24 * 60 {
		log.Warn("uplink: no connection", "broker", "tcp://192.0.2.7:1883", "err", fmt.Errorf("read tcp 192.0.2.9:%d: reset", 40000+i), "again_in", time.Duration(i)*time.Second)
		log.Info("alarm", "id", i)
		if i == 600 || i == 601 {
			log.Error("tape", "err", "full")
		}
		now = now.Add(time.Minute)
	}
	lines := strings.Split(strings.TrimSpace(out.String()), "\n")
	var said, infos int
	for _, line := range lines {
		if strings.Contains(line, "no connection") {
			said++
		}
		if strings.Contains(line, "msg=alarm") {
			infos++
		}
	}
	if infos != 24*60 || said < 20 || said > 32 || strings.Count(out.String(), "msg=tape") > 2 {
		t.Errorf("%d lines of a day without a broker, %d of alarms, %d of the tape", said, infos, strings.Count(out.String(), "msg=tape"))
	}
	if !strings.Contains(out.String(), "times_before=59") {
		t.Errorf("nobody says how often it came: %s", out.String()[:400])
	}
	if l.held+l.lines[slog.LevelWarn]+l.lines[slog.LevelError] != 24*60+2 || l.lines[slog.LevelInfo] != 24*60 {
		t.Errorf("counts do not add up: %+v", l)
	}
	out.Reset()
	now = now.Add(5 * time.Hour) // it was well; now it begins anew
	log.With("device", "plc-1").Warn("does not answer")
	log.With("device", "plc-2").Warn("does not answer")
	log.Warn("uplink: no connection", "broker", "tcp://192.0.2.7:1883", "err", errors.New("read tcp 192.0.2.9:1: reset"), "again_in", time.Second)
	if n := strings.Count(out.String(), "\n"); n != 3 {
		t.Errorf("%d lines of three troubles:\n%s", n, out.String())
	}
}

// BenchmarkScrape is the cost of one scrape, which the line does not pay; BenchmarkMeter is what the line pays per block.
func BenchmarkScrape(b *testing.B) {
	s := benchStation(b)
	b.ReportAllocs()
	for b.Loop() {
		_ = s.Metrics()
	}
}

func BenchmarkMeter(b *testing.B) {
	s := benchStation(b)
	h := newHeld()
	b.ReportAllocs()
	for b.Loop() {
		began := time.Now()
		s.meter.inStates = time.Since(began)
		_ = s.meter.kept(func() error { return nil })
		s.measured(int(s.info.Rate/50), time.Since(began), h)
	}
}

func benchStation(b *testing.B) *Station {
	b.Helper()
	r := recorded(b)
	s, err := Open(Options{SkidFile: r.skid, State: b.TempDir(), Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Listen: "none"})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { _ = s.Close() })
	if err := s.Run(b.Context()); err != nil {
		b.Fatal(err)
	}
	return s
}
