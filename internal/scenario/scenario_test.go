package scenario

import (
	"strings"
	"testing"

	"lapwing/configs"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// examples are the example machines.
func examples(t *testing.T) (out []*skid.Skid) {
	t.Helper()
	files, err := configs.Files.ReadDir(".")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		if !strings.HasSuffix(f.Name(), ".yaml") {
			continue
		}
		raw, err := configs.Files.ReadFile(f.Name())
		if err != nil {
			t.Fatal(err)
		}
		sk, err := skid.Parse(f.Name(), raw)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, sk)
	}
	if len(out) < 3 {
		t.Fatalf("%d examples", len(out))
	}
	return out
}

// TestEveryScenarioRunsOnEveryExample: the model takes every script, chapters are in order and inside the run.
func TestEveryScenarioRunsOnEveryExample(t *testing.T) {
	for _, sk := range examples(t) {
		for _, name := range Names() {
			r, err := Get(name, sk)
			if err != nil {
				t.Fatal(err)
			}
			if _, err := model.New(sk, r.Script, model.Options{Rate: 5000}); err != nil {
				t.Errorf("%s on %s: %v", name, sk.ID, err)
			}
			for i, c := range r.Chapters {
				if c.Text == "" || r.Duration > 0 && c.At > r.Duration || i > 0 && c.At < r.Chapters[i-1].At {
					t.Errorf("%s on %s: chapter %d at %g s of %g: %q", name, sk.ID, i, c.At, r.Duration, c.Text)
				}
			}
			if !strings.Contains(Help(), name) {
				t.Errorf("the help does not name %s", name)
			}
		}
	}
	if _, err := Get("nothing", examples(t)[0]); err == nil {
		t.Error("an unknown scenario was given")
	}
}

// TestFaultsFitTheirMachine: every fault has a name of its own, a subject on the machine, and a script that the model takes.
func TestFaultsFitTheirMachine(t *testing.T) {
	for i, sk := range examples(t) {
		seen := map[string]bool{}
		for _, f := range Faults(sk) {
			if seen[f.Name] || f.Text == "" || f.Subject == "" || len(f.Changes) == 0 {
				t.Errorf("%s: %+v", sk.ID, f)
			}
			seen[f.Name] = true
			s := f.With(model.Script{Step: sk.Steps[0].Code}, 1, 10)
			for _, c := range s.Changes {
				if c.At != 1 || c.Over != 0 && !grows(c.What) {
					t.Errorf("%s on %s: %+v", f.Name, sk.ID, c)
				}
			}
			if i > 0 {
				continue // building the model is what takes time here; one machine shows whether it takes the changes
			}
			if _, err := model.New(sk, s, model.Options{Rate: 5000}); err != nil {
				t.Errorf("%s on %s: %v", f.Name, sk.ID, err)
			}
		}
		if len(seen) < 20 {
			t.Errorf("%s: only %d faults", sk.ID, len(seen))
		}
	}
}
