package main

import (
	"bytes"
	"encoding/csv"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// The map of an example as people and programs get it; a broken file is refused with its place.
func TestRegisters(t *testing.T) {
	file := filepath.Join("..", "..", "configs", "biomethane-two-throw.yaml")
	run := func(args ...string) (string, error) {
		var out bytes.Buffer
		cmd := root()
		cmd.SetOut(&out)
		cmd.SetArgs(append([]string{"registers"}, args...))
		err := cmd.ExecuteContext(t.Context())
		return out.String(), err
	}
	text, err := run(file)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"heartbeat", "30101", "40101", "t2.ce.discharge found_leak_area_mm2", "t1.rings leak_percent", "nothing serves these registers yet"} {
		if !strings.Contains(text, want) {
			t.Errorf("the table does not hold %q", want)
		}
	}
	table, err := run(file, "--csv")
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(strings.NewReader(table)).ReadAll()
	if err != nil || len(rows) < 100 || rows[0][0] != "address" {
		t.Errorf("%d rows, %v", len(rows), err)
	}
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	broken := filepath.Join(t.TempDir(), "broken.yaml")
	if err := os.WriteFile(broken, append(raw, "\nmodbus:\n  server: {listen: here}\n"...), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := run(broken); err == nil || !strings.Contains(err.Error(), "modbus.server.listen") {
		t.Errorf("%v", err)
	}
}
