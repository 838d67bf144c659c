package plant

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"lapwing/internal/skid"
)

const (
	mostErrors = 20      // reported before the rest of a file is given up
	mostRows   = 5000000 // two months of one row a second
	zeroC      = 273.15
)

// known is what a column may be called, with the bounds of its values in people's units and the way to SI.
type known struct {
	column
	lo, hi        float64
	factor, shift float64
}

// names lists every column a file for this skid may have: load_step, s<stage>_p_suction_bar_abs (or _bar_gauge),
// s<stage>_p_discharge_…, s<stage>_t_suction_c, s<stage>_t_discharge_c, and <valve>_cover_c with the dots of the
// valve's id as underscores.
func names(sk *skid.Skid) []known {
	all := []known{{column{name: "load_step", what: loadStep}, 0, 65535, 1, 0}}
	atm := sk.Machine.Atmosphere
	for n := range sk.Stages() {
		for _, side := range []struct {
			name string
			p, t int
		}{{"suction", pSuction, tSuction}, {"discharge", pDischarge, tDischarge}} {
			id := fmt.Sprintf("s%d_p_%s_bar_", n+1, side.name)
			all = append(all,
				known{column{name: id + "abs", what: side.p, stage: n}, 0.001, 4000, 1e5, 0},
				known{column{name: id + "gauge", what: side.p, stage: n}, 0.001 - atm/1e5, 4000, 1e5, atm},
				known{column{name: fmt.Sprintf("s%d_t_%s_c", n+1, side.name), what: side.t, stage: n}, -200, 400, 1, zeroC})
		}
	}
	for _, v := range valves(sk) {
		all = append(all, known{column{name: strings.ReplaceAll(v, ".", "_") + "_cover_c", what: coverTemperature, valve: v}, -100, 400, 1, zeroC})
	}
	return all
}

// Columns gives the header that a file for this skid has in full, pressures absolute.
func Columns(sk *skid.Skid) []string {
	out := []string{"time_s"}
	for _, k := range names(sk) {
		if !strings.HasSuffix(k.name, "_bar_gauge") {
			out = append(out, k.name)
		}
	}
	return out
}

// ReadCSV reads process values: a header, then rows in the order of time. time_s is needed, every other column may be
// left out; an unknown one is refused. An empty cell is a value that was not known then. Lines that begin with # are
// passed over. The error joins up to twenty mistakes, each with its line and column name; with any there is no Series.
func ReadCSV(r io.Reader, sk *skid.Skid) (*Series, error) {
	c := csv.NewReader(r)
	c.Comment = '#'
	c.FieldsPerRecord = -1 // counted below, with a clearer message
	c.ReuseRecord = true
	c.TrimLeadingSpace = true
	head, err := c.Read()
	if errors.Is(err, io.EOF) {
		return nil, errors.New("plant: the file is empty; its first line names the columns: time_s,load_step,…")
	}
	if err != nil {
		return nil, fmt.Errorf("plant: %w", err)
	}
	line, _ := c.FieldPos(0)
	columns, time, err := header(head, line, sk)
	if err != nil {
		return nil, err
	}
	s := Fixed(sk)
	for _, k := range columns {
		if k.name != "" {
			s.columns = append(s.columns, k.column)
		}
	}
	var errs []error
	for len(errs) < mostErrors {
		rec, err := c.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			errs = append(errs, fmt.Errorf("plant: %w", err))
			break
		}
		line, _ := c.FieldPos(0)
		if len(s.time) == mostRows {
			errs = append(errs, fmt.Errorf("plant: line %d: more than %d rows", line, mostRows))
			break
		}
		errs = s.row(rec, line, columns, time, sk, errs)
	}
	if len(errs) == 0 && len(s.time) == 0 {
		errs = append(errs, errors.New("plant: there is a header but no row"))
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	return s, nil
}

// header finds each column; the one of the time keeps no name.
func header(head []string, line int, sk *skid.Skid) (columns []known, time int, err error) {
	all := names(sk)
	var errs []error
	bad := func(format string, args ...any) {
		errs = append(errs, fmt.Errorf("plant: line %d: "+format, append([]any{line}, args...)...))
	}
	columns, time = make([]known, len(head)), -1
	at := map[column]string{} // what a column fills, without its name → name
	for i, h := range head {
		h = strings.TrimSpace(h)
		if i == 0 {
			h = strings.TrimPrefix(h, "\ufeff") // a byte-order mark, as spreadsheets write it
		}
		if h == "time_s" {
			if time >= 0 {
				bad("column time_s stands twice")
			}
			time = i
			continue
		}
		j := slices.IndexFunc(all, func(k known) bool { return k.name == h })
		if j < 0 {
			hint := "known are " + strings.Join(Columns(sk), ", ")
			switch {
			case len(head) == 1 && strings.ContainsAny(h, ";\t"):
				hint = "separate the columns with commas"
			case strings.HasSuffix(h, "_bar"):
				hint = "say whether the pressure is absolute or gauge: " + h + "_abs or " + h + "_gauge"
			}
			bad("column %q is unknown: %s", short(h), hint)
			continue
		}
		columns[i] = all[j]
		key := all[j].column
		key.name = ""
		if before, double := at[key]; double {
			bad("column %s gives what %s gives already: keep one", h, before)
		}
		at[key] = h
	}
	if time < 0 {
		bad("column time_s is missing: seconds from the start of the recording")
	}
	return columns, time, errors.Join(errs...)
}

// row takes one line in, or adds its mistakes.
func (s *Series) row(rec []string, line int, columns []known, time int, sk *skid.Skid, errs []error) []error {
	before := len(errs)
	bad := func(format string, args ...any) {
		errs = append(errs, fmt.Errorf("plant: line %d: "+format, append([]any{line}, args...)...))
	}
	if len(rec) != len(columns) {
		bad("%d cells, the header has %d columns", len(rec), len(columns))
		return errs
	}
	t, err := number(rec[time])
	switch {
	case err != nil:
		bad("column time_s: %v", err)
	case len(s.time) > 0 && t <= s.time[len(s.time)-1]:
		bad("column time_s: %g s does not come after the row before (%g s)", t, s.time[len(s.time)-1])
	}
	row := make([]float64, 0, len(s.columns))
	for i, k := range columns {
		if i == time {
			continue
		}
		cell := strings.TrimSpace(rec[i])
		if cell == "" {
			row = append(row, math.NaN())
			continue
		}
		v, err := number(cell)
		switch {
		case err != nil:
			bad("column %s: %v", k.name, err)
		case v < k.lo || v > k.hi:
			bad("column %s: %g is outside %g to %g", k.name, v, k.lo, k.hi)
		case k.what == loadStep:
			if _, ok := sk.FindStep(int(v)); !ok || v != math.Trunc(v) {
				bad("column load_step: the skid file has no load step %g", v)
			}
		}
		row = append(row, v*k.factor+k.shift)
	}
	if len(errs) > before {
		return errs
	}
	s.time = append(s.time, t)
	s.value = append(s.value, row)
	return errs
}

// number reads a finite decimal number.
func number(cell string) (float64, error) {
	cell = strings.TrimSpace(cell)
	v, err := strconv.ParseFloat(cell, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return 0, fmt.Errorf("%q is not a number", short(cell))
	}
	return v, nil
}

// short keeps foreign text in a message short.
func short(s string) string {
	if r := []rune(s); len(r) > 40 {
		return string(r[:40]) + "…"
	}
	return s
}
