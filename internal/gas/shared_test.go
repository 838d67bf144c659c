package gas

import (
	"bufio"
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// table is a CSV of the shared reference folder with its compositions, by name ("" when there is only one).
type table struct {
	rows  []map[string]string
	gases map[string]*Mixture
}

func num(t *testing.T, row map[string]string, name string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(row[name], 64)
	if err != nil {
		t.Fatalf("column %s: %v", name, err)
	}
	return v
}

func readShared(t *testing.T, name string) table {
	t.Helper()
	f, err := os.Open(filepath.Join(sharedDir(t), "reference", "gas", name))
	if err != nil {
		t.Skipf("shared reference values absent: %v", err)
	}
	defer f.Close()
	out := table{gases: map[string]*Mixture{}}
	var body strings.Builder
	sc := bufio.NewScanner(f)
	sc.Buffer(nil, 1<<20)
	for sc.Scan() {
		line := sc.Text()
		if !strings.HasPrefix(line, "#") {
			body.WriteString(line + "\n")
			continue
		}
		label, rest, ok := strings.Cut(strings.TrimPrefix(line, "# composition"), ":")
		if !ok || !strings.HasPrefix(line, "# composition") {
			continue
		}
		label = strings.TrimSpace(strings.ReplaceAll(label, "(mole fractions)", ""))
		rest, _, _ = strings.Cut(rest, "  (sum")
		var comp []Fraction
		for _, part := range strings.Split(rest, ";") {
			k, v, _ := strings.Cut(strings.TrimSpace(part), "=")
			x, err := strconv.ParseFloat(v, 64)
			if err != nil {
				t.Fatalf("%s: %q: %v", name, part, err)
			}
			comp = append(comp, Fraction{k, x})
		}
		m, err := New(comp)
		if err != nil {
			t.Fatalf("%s: %s: %v", name, label, err)
		}
		out.gases[label] = m
	}
	rows, err := csv.NewReader(strings.NewReader(body.String())).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, cells := range rows[1:] {
		m := map[string]string{}
		for i, head := range rows[0] {
			m[head] = cells[i]
		}
		out.rows = append(out.rows, m)
	}
	return out
}

// sharedDir is $LAPWING_SHARED, or ../shared beside the repository.
func sharedDir(t *testing.T) string {
	if dir := os.Getenv("LAPWING_SHARED"); dir != "" {
		return dir
	}
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			return filepath.Join(dir, "..", "shared")
		}
		if dir == filepath.Dir(dir) {
			t.Fatal("no go.mod above the test")
		}
		dir = filepath.Dir(dir)
	}
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s = %.12g, want %.12g (off by %.2e, allowed %.1e)", what, got, want, got/want-1, rel)
	}
}

// within is near with an absolute floor, for quantities that pass through zero.
func within(t *testing.T, what string, got, want, abs float64) {
	t.Helper()
	if !(math.Abs(got-want) <= abs) {
		t.Errorf("%s = %.12g, want %.12g (off by %.2e, allowed %.1e)", what, got, want, got-want, abs)
	}
}
