// Package internal holds only tests of the structure: which room may know which.
package internal

import (
	"go/parser"
	"go/token"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// pure rooms lie between frame and alarm: the same samples must give the same findings, bit for bit, live or offline.
var pure = []string{"crank", "gas", "dsp", "frame", "turn", "ripple", "window", "measure", "leak", "passage", "datum", "sensor", "duty", "verdict", "alarm"}

var forbidden = map[string]string{
	"os":               "files belong to the edges",
	"net":              "sockets belong to the edges",
	"net/http":         "sockets belong to the edges",
	"log":              "return an error or a finding; only edges log",
	"log/slog":         "return an error or a finding; only edges log",
	"sync":             "the middle has no goroutines, hence no locks",
	"sync/atomic":      "the middle has no goroutines, hence no locks",
	"context":          "nothing in the middle waits",
	"math/rand":        "results must be reproducible",
	"math/rand/v2":     "results must be reproducible",
	"os/exec":          "files belong to the edges",
	"syscall":          "files belong to the edges",
	"runtime":          "the middle does not know the machine it runs on",
	"go.etcd.io/bbolt": "the middle has no files",
}

// edges never import each other: each reads one snapshot of the present state.
var edges = []string{"uplink", "plant", "panel"}

func sources(t *testing.T, room string) map[string]bool {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(room, "*.go"))
	if err != nil || len(files) == 0 {
		t.Fatalf("room %s: no sources (%v)", room, err)
	}
	imports := map[string]bool{}
	fset := token.NewFileSet()
	for _, f := range files {
		if strings.HasSuffix(f, "_test.go") {
			continue
		}
		ast, err := parser.ParseFile(fset, f, nil, parser.ImportsOnly)
		if err != nil {
			t.Fatal(err)
		}
		for _, im := range ast.Imports {
			p, err := strconv.Unquote(im.Path.Value)
			if err != nil {
				t.Fatal(err)
			}
			imports[p] = true
		}
	}
	return imports
}

func TestTheMiddleIsPure(t *testing.T) {
	isPure := map[string]bool{}
	for _, r := range pure {
		isPure[r] = true
	}
	for _, r := range pure {
		for im := range sources(t, r) {
			if why, bad := forbidden[im]; bad {
				t.Errorf("internal/%s imports %s: %s", r, im, why)
			}
			// acq is the contract of a block; what frame takes of it is data.
			if room, ok := strings.CutPrefix(im, "lapwing/internal/"); ok && !isPure[room] && room != "acq" {
				t.Errorf("internal/%s imports internal/%s, which is not pure", r, room)
			}
		}
	}
}

func TestEdgesDoNotKnowEachOther(t *testing.T) {
	for _, a := range edges {
		if _, err := os.Stat(a); os.IsNotExist(err) {
			t.Errorf("edge %s is gone: take it out of the list", a)
			continue
		}
		for im := range sources(t, a) {
			for _, b := range append([]string{"station"}, edges...) {
				if b != a && im == "lapwing/internal/"+b {
					t.Errorf("internal/%s imports internal/%s: edges read the snapshot, only station knows all rooms", a, b)
				}
			}
		}
	}
}

// TestTheModelSharesNoFormulas: the modelled machine tests the analysis only while both work things out for themselves.
// Common are the geometry of the slider-crank, the equation of state, the skid file, and the form of a block.
func TestTheModelSharesNoFormulas(t *testing.T) {
	shared := map[string]bool{"acq": true, "crank": true, "gas": true, "skid": true}
	for im := range sources(t, "model") {
		if room, ok := strings.CutPrefix(im, "lapwing/internal/"); ok && !shared[room] {
			t.Errorf("internal/model imports internal/%s: what it would test is then computed by itself", room)
		}
	}
	for _, r := range pure {
		for im := range sources(t, r) {
			if im == "lapwing/internal/model" || im == "lapwing/internal/scenario" {
				t.Errorf("internal/%s imports %s: the analysis must not know the truth", r, im)
			}
		}
	}
}

func TestEveryPackageSaysWhatItIs(t *testing.T) {
	err := filepath.WalkDir("..", func(path string, d os.DirEntry, err error) error {
		if err != nil || !d.IsDir() || d.Name() == "testdata" || (strings.HasPrefix(d.Name(), ".") && path != "..") {
			if d != nil && d.IsDir() && path != ".." && (d.Name() == "testdata" || strings.HasPrefix(d.Name(), ".")) {
				return filepath.SkipDir
			}
			return err
		}
		files, _ := filepath.Glob(filepath.Join(path, "*.go"))
		docs, code := 0, 0
		fset := token.NewFileSet()
		for _, f := range files {
			if strings.HasSuffix(f, "_test.go") {
				continue
			}
			code++
			ast, err := parser.ParseFile(fset, f, nil, parser.PackageClauseOnly|parser.ParseComments)
			if err != nil {
				return err
			}
			if ast.Doc != nil {
				docs++
			}
		}
		if code > 0 && docs != 1 {
			t.Errorf("%s has %d package comments, wants one", path, docs)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}
