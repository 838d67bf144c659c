package station

import (
	"fmt"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/acq/exec"
)

// capture says how a capture program does.
func (c *scrape) capture(s *Station) {
	x, ok := s.src.(*exec.Source)
	if !ok {
		return
	}
	st := x.Stats()
	c.counter("capture_starts_total", "Starts of the capture program.", count(st.Starts))
	c.counter("capture_stalls_total", "Times that it gave nothing and was ended.", count(st.Stalls))
	c.counter("capture_overruns_total", "Overruns that it reported.", count(st.Overruns))
	c.counter("capture_gaps_total", "Times that samples went missing while it ran, by the clock.", count(st.Short))
	c.counter("capture_partial_frames_total", "Times that it ended within a frame.", count(st.Partial))
	c.counter("capture_dropped_blocks_total", "Blocks that were not taken in time.", count(st.Full))
	c.counter("capture_lost_samples_total", "Samples per channel that were lost in any of these ways.", count(st.Lost))
	c.gauge("capture_drift_ratio", "By how much the converter is faster than its stated rate, by this machine's clock; absent in the first ten minutes.", value(st.DriftPPM*1e-6))
	c.gauge("capture_trouble_timestamp_seconds", "When any of these happened last.", stamp(st.LastAt))
}

// rememberTrouble is how long health speaks of a trouble of the capture program that is over.
const rememberTrouble = time.Hour

func captureTrouble(src acq.Source, now time.Time) []string {
	x, ok := src.(*exec.Source)
	if !ok {
		return nil
	}
	st := x.Stats()
	if st.LastAt.IsZero() || now.Sub(st.LastAt) > rememberTrouble {
		return nil
	}
	said := fmt.Sprintf("the capture program lost samples or was started anew within the last hour: since the start %d starts, %d stalls, %d overruns, %d gaps, %.4g s of samples lost",
		st.Starts, st.Stalls, st.Overruns, st.Short, float64(st.Lost)/x.Info().Rate)
	if st.LastError != "" {
		said += "; it ended last with: " + st.LastError
	}
	return []string{said}
}
