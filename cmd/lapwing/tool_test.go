package main

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// TestSystemCheck: the example machines pass, and say what they were understood to be.
func TestSystemCheck(t *testing.T) {
	system(t)
	files, err := filepath.Glob(filepath.Join(configs, "*.yaml"))
	if err != nil || len(files) != 3 {
		t.Fatalf("example skid files: %v %v", files, err)
	}
	for _, f := range files {
		out, errs, code := lapwing(t, "check", f)
		if code != 0 || errs != "" {
			t.Errorf("check %s: exit %d\n%s", f, code, errs)
		}
		for _, want := range []string{"swept", "clearance", "rod load", "Doubts", "Isolate, depressurise and lock out"} {
			if !strings.Contains(out, want) {
				t.Errorf("check %s does not speak of %q", f, want)
			}
		}
	}
}

// TestSystemCheckRefuses: what is wrong is refused with file, line, column and what to write, all of it at once.
func TestSystemCheckRefuses(t *testing.T) {
	system(t)
	raw, err := os.ReadFile(filepath.Join(configs, "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	good := string(raw)
	cases := []struct{ name, from, to, want string }{
		{"unknown key", "  rated_rpm: 740 ", "  rated_speed: 740 ", "rated_speed"},
		{"unit in the value", "    bore_mm: 220\n", "    bore_mm: 220 mm\n", "bore_mm"},
		{"impossible geometry", "    piston_rod_mm: 50\n    # tail", "    piston_rod_mm: 230\n    # tail", "rod"},
		{"two channels on one input", "{id: a2, input: 6", "{id: a2, input: 5", "input"},
		{"not YAML", "machine:\n", "machine: [\n", ""},
	}
	for _, c := range cases {
		file := filepath.Join(t.TempDir(), "broken.yaml")
		broken := strings.Replace(good, c.from, c.to, 1)
		if broken == good {
			t.Fatalf("%s: the example has no %q", c.name, c.from)
		}
		if err := os.WriteFile(file, []byte(broken), 0o644); err != nil {
			t.Fatal(err)
		}
		out, errs, code := lapwing(t, "check", file)
		if code != 1 || out != "" {
			t.Errorf("%s: exit %d, output %q", c.name, code, out)
		}
		place := regexp.MustCompile(`broken\.yaml:(\d+):(\d+): `)
		if !place.MatchString(errs) || !strings.Contains(errs, c.want) {
			t.Errorf("%s: the message names no place or cause: %s", c.name, errs)
		}
	}
	if _, errs, code := lapwing(t, "check", filepath.Join(t.TempDir(), "absent.yaml")); code != 1 || !strings.Contains(errs, "absent.yaml") {
		t.Errorf("check of a file that is not there: exit %d, %s", code, errs)
	}
}

// TestSystemHelp: every command says what it is for and what its options mean, and cautions where its output could
// send somebody to the machine.
func TestSystemHelp(t *testing.T) {
	system(t)
	const hands = "lock"
	for _, c := range []struct {
		args []string
		want []string
	}{
		{nil, []string{"technician", "control room", "analyst", "check", "demo", "review", "pull", "listen", hands}},
		{[]string{"check"}, []string{"line, column", "Doubts", "--rate", "Examples:", hands}},
		{[]string{"demo"}, []string{"grow", "--once", "--fast", "invented"}},
		{[]string{"review"}, []string{"--learn", "--process", "--out", "Examples:", hands}},
		{[]string{"pull"}, []string{"--state", "--daemon", "Examples:", "not a permit"}},
		{[]string{"listen"}, []string{"--broker", "--password-file", "Examples:", hands}},
	} {
		out, _, code := lapwing(t, append(c.args, "--help")...)
		if code != 0 || !strings.Contains(out, "Usage:") {
			t.Errorf("%v --help: exit %d", c.args, code)
		}
		for _, w := range c.want {
			if !strings.Contains(out, w) {
				t.Errorf("%v --help does not speak of %q", c.args, w)
			}
		}
	}
	for _, c := range root().Commands() {
		out, _, code := lapwing(t, c.Name(), "--help")
		if code != 0 || !strings.Contains(out, "Usage:") || len(strings.Fields(c.Long)) < 20 {
			t.Errorf("%s --help teaches nothing: exit %d\n%s", c.Name(), code, out)
		}
	}
	for _, wrong := range [][]string{{"chekc"}, {"check"}, {"review", "x.wav"}, {"pull", "a", "b"}, {"demo", "--scenario", "nothing", "--out", filepath.Join(t.TempDir(), "demo")}} {
		if out, errs, code := lapwing(t, wrong...); code != 1 || !strings.HasPrefix(errs, "lapwing: ") {
			t.Errorf("%v: exit %d, %s%s", wrong, code, out, errs)
		}
	}
}
