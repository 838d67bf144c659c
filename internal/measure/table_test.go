package measure

import (
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

var update = flag.Bool("update", false, "write the table of measures into DEVELOPERS.md and the package documentation anew")

const (
	begin = "<!-- measures:begin -->\n"
	end   = "<!-- measures:end -->"
)

// The definitions are the single truth: what people read of them is made of them.
func TestTableIsUpToDate(t *testing.T) {
	between(t, filepath.Join(root(t), "DEVELOPERS.md"), begin, end, "\n"+Table())
	between(t, "doc.go", "// made of the definitions by go test -run TestTable -args -update:\n//\n", "// Sources:", comment())
}

// between compares what stands between two marks of a file, or writes it.
func between(t *testing.T, file, begin, end, want string) {
	t.Helper()
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	before, rest, ok := strings.Cut(string(raw), begin)
	old, after, ok2 := strings.Cut(rest, end)
	switch {
	case !ok || !ok2:
		t.Fatalf("%s has no marks %q and %q", file, begin, end)
	case old == want:
	case *update:
		if err := os.WriteFile(file, []byte(before+begin+want+end+after), 0o644); err != nil {
			t.Fatal(err)
		}
	default:
		t.Errorf("the measures in %s are not those of the definitions: go test ./internal/measure -run TestTable -args -update", file)
	}
}

// root walks up to the module's directory.
func root(t *testing.T) string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for ; ; dir = filepath.Dir(dir) {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			return dir
		}
		if dir == filepath.Dir(dir) {
			t.Fatal("no go.mod above")
		}
	}
}

func TestDefinitionsAreWhole(t *testing.T) {
	for _, g := range groups() {
		seen := map[string]bool{}
		for _, d := range g.defs {
			if seen[d.name] {
				t.Errorf("%s: %s twice", g.title, d.name)
			}
			seen[d.name] = true
			for _, s := range []string{d.name, d.unit, d.what, d.source, d.valid, d.unc} {
				if s == "" || strings.ContainsAny(s, "|\n") {
					t.Errorf("%s: %s: a part is missing or breaks a table: %q", g.title, d.name, s)
				}
			}
			if d.scale == 0 {
				t.Errorf("%s: %s has no scale", g.title, d.name)
			}
			if strings.ContainsAny(d.how, "|\n") {
				t.Errorf("%s: %s: %q breaks a table", g.title, d.name, d.how)
			}
		}
	}
	m := twoEnds()
	m.Throws[0].Acoustic = true
	m.Throws[0].Ends[0].Suction = []Valve{{ID: "t1.he.s1", Cover: true}}
	seen := map[string]bool{}
	perCylinder := 0
	for _, f := range NewLayout(m) {
		if key := f.Subject + " " + f.Name; seen[key] {
			t.Errorf("%s twice in the layout", key)
		} else {
			seen[key] = true
		}
		if f.Class != Vibration {
			perCylinder++
		}
	}
	if perCylinder < 40 { // beside the vibration measures: issue and DESIGN
		t.Errorf("only %d measures a cylinder beside vibration", perCylinder)
	}
	t.Logf("%d measures a double-acting cylinder, %d beside vibration", len(seen), perCylinder)
}
