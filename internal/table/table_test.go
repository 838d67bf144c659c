package table_test

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/parquet-go/parquet-go"
	"pgregory.net/rapid"

	"lapwing/internal/table"
)

var cols = []table.Column{{Name: "turn", Type: table.Whole}, {Name: "at", Type: table.Instant}, {Name: "value", Type: table.Number, Note: "what was measured"}, {Name: "subject", Type: table.Text}}

type back struct {
	At      *time.Time `parquet:"at,optional,timestamp(nanosecond)"`
	Subject *string    `parquet:"subject,optional"`
	Turn    *int64     `parquet:"turn,optional"`
	Value   *float64   `parquet:"value,optional"`
}

// Whatever is written reads back to the last bit, in both formats, one file a day.
func TestReadsBack(t *testing.T) {
	dir := t.TempDir()
	n := 0
	rapid.Check(t, func(rt *rapid.T) {
		n++
		day := time.Date(2031, 1, 1, 23, 59, 58, 0, time.UTC)
		type row struct {
			at      time.Time
			turn    int64
			value   float64
			subject string
		}
		var rows []row
		for range rapid.IntRange(1, 30).Draw(rt, "rows") {
			day = day.Add(time.Duration(rapid.Int64Range(0, 2e9).Draw(rt, "step")))
			rows = append(rows, row{day, rapid.Int64().Draw(rt, "turn"), rapid.Float64().Draw(rt, "value"), rapid.StringMatching(`[a-z0-9.,"' \n]{0,12}`).Draw(rt, "subject")})
		}
		for _, f := range []table.Format{table.CSV, table.Parquet} {
			tb, err := table.New(table.Place{Dir: dir, Skid: "c1", Name: "measures", File: strconv.Itoa(n), Format: f, About: map[string]string{"k": "v"}}, cols)
			if err != nil {
				rt.Fatal(err)
			}
			for _, r := range rows {
				if err := tb.Row(r.at, r.turn, r.at, r.value, r.subject); err != nil {
					rt.Fatal(err)
				}
			}
			if err := tb.Close(); err != nil {
				rt.Fatal(err)
			}
			i := 0
			for _, path := range tb.Files() {
				if want := "site=unknown/skid=c1/date=" + rows[i].at.Format(time.DateOnly); !strings.Contains(filepath.ToSlash(path), want) {
					rt.Fatalf("%s does not lie in %s", path, want)
				}
				for _, b := range read(rt, path, f) {
					r := rows[i]
					known := !math.IsInf(r.value, 0)
					if *b.Turn != r.turn || !b.At.Equal(r.at) || (b.Value != nil) != known || known && *b.Value != r.value || b.Subject != nil && *b.Subject != r.subject || b.Subject == nil && r.subject != "" {
						rt.Fatalf("%s row %d: %v %v %v %v, written %+v", f, i, *b.Turn, b.At, b.Value, b.Subject, r)
					}
					i++
				}
			}
			if i != len(rows) || tb.Rows() != int64(i) {
				rt.Fatalf("%d rows of %d", i, len(rows))
			}
		}
	})
}

func read(t *rapid.T, path string, f table.Format) (out []back) {
	if f == table.Parquet {
		rows, err := parquet.ReadFile[back](path)
		if err != nil {
			t.Fatal(err)
		}
		return rows
	}
	file, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	recs, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range recs[1:] {
		turn, err1 := strconv.ParseInt(r[0], 10, 64)
		at, err2 := time.Parse(time.RFC3339Nano, r[1])
		b := back{At: &at, Turn: &turn, Subject: &r[3]}
		if r[2] != "" {
			v, err := strconv.ParseFloat(r[2], 64)
			if err != nil {
				t.Fatal(err)
			}
			b.Value = &v
		}
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		out = append(out, b)
	}
	return out
}

func TestRefused(t *testing.T) {
	good := table.Place{Dir: t.TempDir(), Skid: "c1", Name: "x", File: "f", Format: table.CSV}
	for name, change := range map[string]func(*table.Place){
		"format": func(p *table.Place) { p.Format = "xls" }, "skid": func(p *table.Place) { p.Skid = "" }, "path": func(p *table.Place) { p.File = "../f" },
	} {
		p := good
		change(&p)
		if _, err := table.New(p, cols); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	if _, err := table.New(good, append(cols[:1:1], cols[0])); err == nil {
		t.Error("a column twice: no error")
	}
	tb, err := table.New(good, cols)
	if err != nil {
		t.Fatal(err)
	}
	now := time.Unix(1e9, 0)
	if err := tb.Row(now, int64(1)); err == nil {
		t.Error("too few values: no error")
	}
	if err := tb.Row(now, int64(1), now, "1.5", "x"); err == nil || !strings.Contains(err.Error(), "value") {
		t.Errorf("a text among numbers: %v", err)
	}
	bad := good
	bad.Dir = filepath.Join(good.Dir, "file")
	if err := os.WriteFile(bad.Dir, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	if tb, err = table.New(bad, cols); err != nil {
		t.Fatal(err)
	}
	if err := tb.Row(now, int64(1), now, 1.5, "x"); err == nil {
		t.Error("a folder that is a file: no error")
	}
}
