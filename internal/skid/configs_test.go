package skid

import (
	"os"
	"path/filepath"
	"testing"
)

// configs gives the example skid files of the repository.
func configs(t testing.TB) []string {
	t.Helper()
	files, err := filepath.Glob(filepath.Join("..", "..", "configs", "*.yaml"))
	if err != nil || len(files) == 0 {
		t.Fatalf("no example skid files found: %v", err)
	}
	return files
}

func TestEveryExampleFileIsAccepted(t *testing.T) {
	for _, f := range configs(t) {
		sk, err := Load(f)
		if err != nil {
			t.Errorf("%s:\n%v", f, err)
			continue
		}
		raw, _ := os.ReadFile(f)
		if string(sk.Raw) != string(raw) || len(sk.Hash) != 64 {
			t.Errorf("%s: the file does not travel with the skid", f)
		}
	}
}
