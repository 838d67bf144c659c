package demo

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"

	"lapwing/internal/scenario"
	"lapwing/internal/skid"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// teller writes the story: what happens in the model, where the windows are, what the control room receives. Turns
// come from the line, messages from the MQTT client: hence the lock.
type teller struct {
	mu      sync.Mutex
	w       io.Writer
	sk      *skid.Skid
	run     scenario.Run
	chapter int
	nextS   float64
	alarms  []wire.Alarm
}

// Write lets the control room's reader print between the other lines.
func (t *teller) Write(p []byte) (int, error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	for _, l := range strings.SplitAfter(string(p), "\n") {
		if l != "" {
			if _, err := fmt.Fprint(t.w, "  | ", l); err != nil {
				return 0, err
			}
		}
	}
	return len(p), nil
}

func (t *teller) printf(format string, args ...any) {
	t.mu.Lock()
	defer t.mu.Unlock()
	fmt.Fprintf(t.w, format, args...)
}

func (t *teller) opening(file, broker string) {
	t.printf(`%s, %s (invented).
Machine: %s. Broker inside this process: %s.
Lines with "|" are what an MQTT client in the control room receives; the others tell what happens at the skid.
%s

`, t.sk.Name, t.sk.Site, file, broker, wire.Caution)
}

func (t *teller) page(url string) {
	if url != "" {
		t.printf("Status page: %s\n", url)
	}
}

// turn shows where two windows of the first cylinder are, every few seconds of machine time.
func (t *teller) turn(r *wire.Turn) {
	t.mu.Lock()
	defer t.mu.Unlock()
	for t.chapter < len(t.run.Chapters) && r.TimeS >= t.run.Chapters[t.chapter].At {
		fmt.Fprintf(t.w, "\n%6.1f s  %s\n", r.TimeS, t.run.Chapters[t.chapter].Text)
		t.chapter++
	}
	if r.TimeS < t.nextS || !r.Valid || len(r.Throws) == 0 || len(r.Throws[0].Ends) == 0 {
		return
	}
	t.nextS = r.TimeS + 5
	th := &r.Throws[0]
	e := &th.Ends[0]
	line := fmt.Sprintf("%6.1f s  turn %d, %s step %d, ratio %.2f", r.TimeS, r.Turn, th.Duty, th.Step, e.Values["ratio_plateau"])
	if r.RPM != nil {
		line += fmt.Sprintf(", %.0f rpm", *r.RPM)
	}
	for _, ev := range e.Events {
		if !strings.HasSuffix(ev.Event, ".opens") || ev.Window == nil || ev.Angle == nil {
			continue
		}
		line += fmt.Sprintf(" · %s.%s.%s at %.1f° in %.1f–%.1f°", th.ID, e.End, ev.Event, *ev.Angle, ev.Window[0], ev.Window[1])
	}
	fmt.Fprintln(t.w, line)
}

func (t *teller) received(m uplink.Received) {
	if a, ok := alarmOf(t.sk.Uplink.Root, m); ok {
		t.mu.Lock()
		t.alarms = append(t.alarms, a)
		t.mu.Unlock()
	}
}

func (t *teller) pulled(c wire.Clip, dir string) {
	t.printf("\nPulled clip %s (%s) into %s:\n", c.ID, c.Reason, dir)
	files, err := os.ReadDir(dir)
	if err != nil {
		return
	}
	for _, f := range files {
		if st, err := f.Info(); err == nil {
			t.printf("  %-40s %9d bytes\n", f.Name(), st.Size())
		}
	}
	t.printf("The same analysis again: lapwing review --skid %s %s --out again.jsonl\n",
		filepath.Join(dir, "*.skid.yaml"), filepath.Join(dir, "*.wav"))
}

// ending sums up what the control room received; a demo in which no alarm arrived has failed.
func (t *teller) ending() error {
	t.mu.Lock()
	defer t.mu.Unlock()
	fmt.Fprintf(t.w, "\nAlarm messages that the control room received: %d\n", len(t.alarms))
	if t.run.Name == "grow" && t.run.Duration > 0 && t.chapter == len(t.run.Chapters) && len(t.alarms) == 0 {
		return fmt.Errorf("demo: the leak was played and no alarm arrived")
	}
	return nil
}
