package station

import (
	"bytes"
	"testing"

	"lapwing/configs"
	"lapwing/internal/skid"
)

// exampleText is the demo machine's skid file with texts in it exchanged.
func exampleText(t testing.TB, cuts ...[2]string) []byte {
	t.Helper()
	file, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range cuts {
		if !bytes.Contains(file, []byte(c[0])) {
			t.Fatalf("the example has no %q", c[0])
		}
		file = bytes.Replace(file, []byte(c[0]), []byte(c[1]), 1)
	}
	return file
}

// exampleWith is the machine of such a file.
func exampleWith(t testing.TB, cuts ...[2]string) *skid.Skid {
	t.Helper()
	sk, err := skid.Parse("example.yaml", exampleText(t, cuts...))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}
