package frame

import (
	"bufio"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// shared gives a file of the measured toothed wheels, or skips.
func shared(t *testing.T, name string) [][]string {
	t.Helper()
	dir := os.Getenv("LAPWING_SHARED")
	if dir == "" {
		dir = filepath.Join("..", "..", "..", "shared")
	}
	f, err := os.Open(filepath.Join(dir, "data", "tooth-wheels", name))
	if err != nil {
		t.Skipf("shared data absent: %v", err)
	}
	defer f.Close()
	var rows [][]string
	s := bufio.NewScanner(f)
	for s.Scan() {
		row := strings.Split(strings.ReplaceAll(s.Text(), " ", ""), ",")
		if _, err := strconv.ParseFloat(row[0], 64); err != nil || len(row) < 2 {
			continue // the heading
		}
		rows = append(rows, row)
	}
	if err := s.Err(); err != nil || len(rows) < 100 {
		t.Fatalf("%s: %d rows, %v", name, len(rows), err)
	}
	return rows
}

// rendered samples a list of edges as a sensor and a converter would: each sample is the mean over its interval.
func rendered(t *testing.T, rows [][]string, rate float64) []int32 {
	t.Helper()
	at := func(r []string) float64 {
		v, err := strconv.ParseFloat(r[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	start := at(rows[0])
	x := make([]int32, int((at(rows[len(rows)-1])-start)*rate)+2)
	level, k := 0.0, 0
	for i := range x {
		from, to := start+(float64(i)-0.5)/rate, start+(float64(i)+0.5)/rate
		sum, last := 0.0, from
		for k < len(rows) && at(rows[k]) < to {
			sum += level * (max(at(rows[k]), from) - last)
			last = max(at(rows[k]), from)
			level = boolTo(rows[k][1] == "1")
			k++
		}
		sum += level * (to - last)
		x[i] = 200 + int32(math.Round(10000*sum*rate))
	}
	return x
}

// gapsBetween counts the intervals of a list of edges that are 2.3 times as long as both of their neighbours, by the edge
// that ends them: turns counted without any of this package.
func gapsBetween(t *testing.T, rows [][]string, edge Edge, from, to float64) (n int) {
	t.Helper()
	active := map[Edge]string{Rising: "1", Falling: "0"}[edge]
	var at []float64
	for i, r := range rows {
		if v, err := strconv.ParseFloat(r[0], 64); err == nil && i > 0 && r[1] == active && rows[i-1][1] != active {
			at = append(at, v)
		}
	}
	start, err := strconv.ParseFloat(rows[0][0], 64)
	if err != nil {
		t.Fatal(err)
	}
	for i := 2; i+1 < len(at); i++ {
		gap := at[i] - at[i-1]
		if s := at[i] - start; gap > 2.3*(at[i-1]-at[i-2]) && gap > 2.3*(at[i+1]-at[i]) && s > from && s < to {
			n++
		}
	}
	return n
}

// The recordings of real wheels, tracked from the first full turn to the last: no stretch between two frames is left out
// (in noisy-trigger-1 a tooth that stands 0.76 pitches off is taken for another and the next turn begins 9° later). What their
// source states (shared data, README of tooth-wheels) is compared. The Nissan wheel looks the same three times a turn and tells only thirds of a turn.
func TestMeasuredWheels(t *testing.T) {
	for name, c := range map[string]struct {
		wheel     Wheel
		edge      Edge
		turns     int     // frames, each one turn
		lost      int64   // teeth that did not come
		missing   int     // frames marked Missing
		apart     int     // frames that do not follow on the one before
		apartMost float64 // by so many degrees at most
		state     State
	}{
		"trigger_adc_real1.csv":      {wheel: Wheel{Teeth: 60, Missing: 2}, edge: Falling, turns: 14, state: StateRunning},
		"trigger_adc_real2.csv":      {wheel: Wheel{Teeth: 60, Missing: 2}, edge: Falling, turns: 40, state: StateRunning},
		"trigger_adc_real3.csv":      {wheel: Wheel{Teeth: 60, Missing: 2}, edge: Falling, turns: 35, lost: 5},
		"trigger_adc_real4.csv":      {wheel: Wheel{Teeth: 60, Missing: 2}, edge: Falling, turns: 10, lost: 1, state: StateRunning},
		"4b11-running.csv":           {wheel: Wheel{Teeth: 36, Missing: 2, Also: []int{17}}, edge: Falling, turns: 28, state: StateRunning},
		"nick_1.csv":                 {wheel: Wheel{Teeth: 60, Missing: 2}, edge: Falling, turns: 43, state: StateRunning},
		"noisy-trigger-1.csv":        {wheel: Wheel{Teeth: 36, Missing: 2}, turns: 7, lost: 3, apart: 1, apartMost: 10, state: StateRunning},
		"noisy-trigger-2.csv":        {wheel: Wheel{Teeth: 36, Missing: 2}, turns: 21, lost: 23, missing: 2, state: StateRunning},
		"nissan_vq40_cranking-1.csv": {wheel: Wheel{Teeth: 12, Missing: 2}, turns: 25, state: StateRunning},
	} {
		t.Run(name, func(t *testing.T) {
			rows := shared(t, name)
			rate, fastest := 25600.0, 2500.0
			var x []int32
			if strings.HasPrefix(name, "trigger") {
				rate, fastest = 10000, 2000
				for _, r := range rows {
					v, err := strconv.ParseFloat(r[1], 64)
					if err != nil {
						t.Fatal(err)
					}
					x = append(x, int32(math.Round(v*1000)))
				}
			} else {
				x = rendered(t, rows, rate)
			}
			got, st := frames(t, Config{Rate: rate, Inputs: 1, Auto: true, Edge: c.edge, Wheel: c.wheel, MaxRPM: fastest}, oneBlock(x))
			missing, apart := 0, 0
			for i, f := range got {
				if f.Q&Missing != 0 {
					missing++
				}
				if i > 0 && f.Mark0 != got[i-1].Mark1 {
					apart++
					if deg := 360 * (f.Mark0 - got[i-1].Mark1) / (f.Mark1 - f.Mark0); deg > c.apartMost {
						t.Errorf("turn %d begins %.1f° after its neighbour ended", f.Turn, deg)
					}
				}
			}
			rpm := func(f copied) float64 { return 60 * rate / (f.Mark1 - f.Mark0) }
			t.Logf("%v: %d frames from %.3f s to %.3f s of %.3f, %.1f to %.1f rpm, at the end %.1f; %+v; %d Missing, %d apart", c.wheel, len(got), got[0].Mark0/rate, got[len(got)-1].Mark1/rate, float64(len(x))/rate, rpm(got[0]), rpm(got[len(got)-1]), st.RPM, st, missing, apart)
			if len(got) != c.turns || st.Missing != c.lost || missing != c.missing || apart != c.apart || st.State != c.state {
				t.Errorf("%d frames, %d teeth lost, %d frames missing, %d apart, %v; want %d, %d, %d, %d, %v", len(got), st.Missing, missing, apart, st.State, c.turns, c.lost, c.missing, c.apart, c.state)
			}
			if c.lost == 0 && rate > 10000 { // ends lie a tooth before and after the gaps' ends
				from, to := got[0].Mark0/rate, got[len(got)-1].Mark1/rate
				if n := gapsBetween(t, rows, c.edge, from-1e-3, to-1e-3); n != len(got) {
					t.Errorf("%d turns, the list has %d gaps in that time", len(got), n)
				}
			}
			switch name {
			case "4b11-running.csv": // its source: 1436.23 rpm at first sync, from one tooth interval; a turn's mean is near it
				if r := rpm(got[0]); math.Abs(r/1436.23-1) > 0.02 {
					t.Errorf("first turn at %.1f rpm, its source says 1436.23", r)
				}
			case "nick_1.csv":
				if math.Abs(st.RPM-1695) > 10 {
					t.Errorf("%.1f rpm at the end, its source says 1695", st.RPM)
				}
			}
		})
	}
}
