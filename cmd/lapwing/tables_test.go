package main

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"
)

// tables has the Parquet tables of a clip queried by another program, and holds its answers against those that the CSV
// tables of the same clip give when they are added up here.
func tables(t *testing.T, base string) {
	t.Helper()
	lake, flat := filepath.Join(t.TempDir(), "lake"), filepath.Join(t.TempDir(), "flat")
	for dir, format := range map[string]string{lake: "parquet", flat: "csv"} {
		out, errs, code := lapwing(t, "tables", "--skid", base+".skid.yaml", "--process", base+".process.csv", "--to", dir, "--as", format, base+".wav")
		if code != 0 {
			t.Fatalf("tables: exit %d\n%s%s", code, out, errs)
		}
	}
	script, err := filepath.Abs("../../testdata/tables/ask.mjs")
	if err != nil {
		t.Fatal(err)
	}
	strangers := os.Getenv("LAPWING_STRANGERS")
	if strangers == "" {
		t.Fatal("LAPWING_STRANGERS is not set: run make system, which fetches the programs that open what we write")
	}
	out, errs, code := run(t, 2*time.Minute, tool(t, "node"), script, filepath.Join(strangers, "node_modules"), lake, flat)
	if code != 0 {
		t.Fatalf("the query engine: exit %d\n%s", code, errs)
	}
	var got struct {
		Partitions []struct{ Site, Skid, Day, Rows string }
		Worst      []struct {
			Throw, End, Turn string
			Late             float64
		}
		Around []struct {
			ID, Key, Turns string
			Mean           float64
		}
		CSV, Parquet []struct {
			Rows, Turns string
			Mean        float64
		}
		Types []struct {
			Name string `json:"column_name"`
			Type string `json:"column_type"`
		}
	}
	if err := json.Unmarshal([]byte(out), &got); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	measures, events := readTable(t, flat, "measures"), readTable(t, flat, "events")
	if len(got.Partitions) != 1 || got.Partitions[0].Skid != "quillmere-c1" || got.Partitions[0].Rows != strconv.Itoa(len(measures)) {
		t.Errorf("partitions %+v, %d rows of CSV", got.Partitions, len(measures))
	}
	worst := map[string]float64{}
	for _, r := range events {
		angle, err1 := strconv.ParseFloat(r["angle_deg"], 64)
		expected, err2 := strconv.ParseFloat(r["expected_deg"], 64)
		if key := r["throw"] + "." + r["cylinder_end"]; r["event"] == "discharge.opens" && err1 == nil && err2 == nil {
			if w, ok := worst[key]; !ok || angle-expected > w {
				worst[key] = angle - expected
			}
		}
	}
	if len(got.Worst) != len(worst) || len(worst) != 4 {
		t.Errorf("worst openings of %d ends, of %d by CSV", len(got.Worst), len(worst))
	}
	for _, w := range got.Worst {
		if math.Abs(w.Late-worst[w.Throw+"."+w.End]) > 1e-9 {
			t.Errorf("%s.%s: latest discharge opening %.6f°, by CSV %.6f°", w.Throw, w.End, w.Late, worst[w.Throw+"."+w.End])
		}
	}
	if len(got.CSV) != 1 || len(got.Parquet) != 1 || got.CSV[0].Rows != got.Parquet[0].Rows || got.CSV[0].Turns != got.Parquet[0].Turns ||
		math.Abs(got.CSV[0].Mean-got.Parquet[0].Mean) > 1e-6*math.Abs(got.Parquet[0].Mean) {
		t.Errorf("the engine finds %+v in the CSV tables and %+v in the Parquet ones", got.CSV, got.Parquet)
	}
	leak := false
	for _, a := range got.Around {
		leak = leak || strings.HasPrefix(a.Key, "t1.he.suction/leaking") && a.Mean > 1 && a.Mean < 1.6
	}
	if !leak {
		t.Errorf("no measures around the leak's alarm: %+v", got.Around)
	}
	types := map[string]string{}
	for _, c := range got.Types {
		types[c.Name] = c.Type
	}
	if types["value"] != "DOUBLE" || types["turn"] != "BIGINT" || !strings.HasPrefix(types["time_utc"], "TIMESTAMP") {
		t.Errorf("types %v", types)
	}
}

func readTable(t *testing.T, dir, name string) (rows []map[string]string) {
	t.Helper()
	f, err := os.Open(one(t, filepath.Join(dir, name, "*", "*", "*", "*.csv")))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	all, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range all[1:] {
		m := map[string]string{}
		for i, c := range all[0] {
			m[c] = r[i]
		}
		rows = append(rows, m)
	}
	return rows
}
