package main

import (
	"encoding/json"
	"io"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/ledger"
	"lapwing/internal/measure"
	"lapwing/internal/panel"
	"lapwing/internal/skid"
	"lapwing/internal/station"
	"lapwing/internal/wire"
)

// taught is a skid file and a baseline of its machine: every measure at 1 plus shift.
func taught(t *testing.T, shift float64) (skidFile string, b *duty.Baseline) {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join(configs, "fast-small.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	skidFile = filepath.Join(t.TempDir(), "skid.yaml")
	if err := os.WriteFile(skidFile, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Load(skidFile)
	if err != nil {
		t.Fatal(err)
	}
	layout := station.LayoutOf(sk)
	l := duty.NewLearner(layout, duty.LearnConfig{})
	for i := range 60 {
		v := measure.Vector{Turn: int64(i), V: make([]float64, len(layout))}
		for k := range v.V {
			v.V[k] = 1 + shift
		}
		l.Add(0, duty.Point{State: duty.Steady, Step: 0, RPM: 1000, Ps: 4e5, Pd: 10e5}, &v)
	}
	b, err = l.Fit(duty.Header{SkidHash: sk.Hash, Created: time.Date(2030, 5, 2, 6, 0, 0, 0, time.UTC), Kind: duty.Learnt, By: "R. Example"})
	if err != nil {
		t.Fatal(err)
	}
	return skidFile, b
}

func baselineTool(t *testing.T, args ...string) (string, error) {
	t.Helper()
	var out strings.Builder
	cmd := root()
	cmd.SetArgs(append([]string{"baseline"}, args...))
	cmd.SetOut(&out)
	cmd.SetErr(io.Discard)
	err := cmd.ExecuteContext(t.Context())
	return out.String(), err
}

func has(t *testing.T, what, text string, err error, parts ...string) {
	t.Helper()
	if err != nil {
		t.Errorf("%s: %v", what, err)
	}
	for _, p := range parts {
		if !strings.Contains(text, p) {
			t.Errorf("%s says %q, without %q", what, text, p)
		}
	}
}

// The commands on the state folder of a daemon that is down.
func TestBaselineFiles(t *testing.T) {
	skidFile, one := taught(t, 0)
	_, two := taught(t, 0.5)
	state := t.TempDir()
	l, err := ledger.Open(filepath.Join(state, "state.db"), ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	raw, _ := one.Encode()
	if _, err := l.PutBaseline("learning run", json.RawMessage(raw)); err != nil {
		t.Fatal(err)
	}
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "two.json")
	raw, _ = two.Encode()
	if err := os.WriteFile(file, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	out, err := baselineTool(t, "list", "--state", state)
	has(t, "list", out, err, "1   yes", "2030-05-02 06:00:00Z", "R. Example")
	out, err = baselineTool(t, "import", file, "--state", state, "--skid", skidFile, "--by", "A", "--reason", "new computer")
	has(t, "import", out, err, "stored as baseline 2")
	out, err = baselineTool(t, "list", "--state", state)
	has(t, "list", out, err, "1   -", "2   yes")
	out, err = baselineTool(t, "show", "2", "--state", state, "--skid", skidFile)
	has(t, "show", out, err, "2.48–2.53", "t1.he.suction.opens", "flow_balance", "1.5")
	out, err = baselineTool(t, "compare", "1", file, "--state", state, "--skid", skidFile)
	has(t, "compare", out, err, "load step 0, 1000 rpm, ratio 2.50: t1.he flow_balance: 1.5, was 1, up by", "spreads or more")
	out, err = baselineTool(t, "compare", "1", "1", "--state", state)
	has(t, "compare with itself", out, err, "0 of ")
	exported := filepath.Join(t.TempDir(), "out.json")
	if _, err := baselineTool(t, "export", "2", exported, "--state", state); err != nil {
		t.Error(err)
	}
	if got, err := os.ReadFile(exported); err != nil || string(got) != string(raw) {
		t.Errorf("exported %d bytes, %v", len(got), err)
	}
	if _, err := baselineTool(t, "export", "2", exported, "--state", state); err == nil {
		t.Error("export writes over a file")
	}
	text, _ := os.ReadFile(skidFile)
	if err := os.WriteFile(skidFile, append(text, "\n# another version\n"...), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := baselineTool(t, "import", file, "--state", state, "--skid", skidFile, "--by", "A", "--reason", "r"); err == nil || !strings.Contains(err.Error(), "another version of the skid file") {
		t.Errorf("import against another skid file: %v", err)
	}
	if _, err := baselineTool(t, "learn", "--state", state, "--by", "A"); err == nil || !strings.Contains(err.Error(), "running daemon") {
		t.Errorf("learn without a daemon: %v", err)
	}
}

// The commands that ask a running daemon.
func TestBaselineOrders(t *testing.T) {
	var got []wire.Order
	mux := http.NewServeMux()
	mux.HandleFunc("POST /api/v1/orders", func(w http.ResponseWriter, r *http.Request) {
		raw, _ := io.ReadAll(r.Body)
		o, err := wire.ParseOrder(raw)
		if err == nil {
			err = o.Check()
		}
		if err != nil || r.Header.Get(panel.OrderHeader) != "tool" || r.Header.Get("Content-Type") != "application/json" {
			t.Errorf("order %s: %v", raw, err)
		}
		got = append(got, o)
		rec := wire.Receipt{Version: 1, Act: wire.Act{Type: "act", Verb: o.Verb, Accepted: o.Verb != wire.VerbLearnDrop, Said: "said of " + o.Verb}, OnDisk: true}
		if !rec.Accepted {
			w.WriteHeader(http.StatusConflict)
		}
		_ = json.NewEncoder(w).Encode(rec)
	})
	mux.HandleFunc("GET /api/v1/learning", func(w http.ResponseWriter, r *http.Request) {
		_ = json.NewEncoder(w).Encode(wire.Learning{State: "proposed", Kind: "learnt", By: "A", Said: "it waits", Proposed: &wire.Baseline{Doubts: []string{"t1.he.suction may leak"}},
			Coverage: []wire.Covered{{Throw: "t1", LoadStep: 2, Turns: 40, Want: 600, Ratio: &[2]float64{1.8, 2.6}, Missing: "560 more steady turns"}}})
	})
	srv := httptest.NewServer(mux)
	defer srv.Close()
	for _, c := range []struct {
		args []string
		want wire.Order
	}{
		{[]string{"learn", "--by", "A", "--turns", "100", "--reason", "overhauled"}, wire.Order{Verb: wire.VerbLearnStart, By: "A", Turns: 100, Reason: "overhauled"}},
		{[]string{"learn", "--by", "A", "--add", "--accept"}, wire.Order{Verb: wire.VerbLearnStart, By: "A", Turns: 600, Add: true, Auto: true}},
		{[]string{"renew", "t1.he.s1", "--by", "A"}, wire.Order{Verb: wire.VerbRenew, By: "A", Turns: 600, Subject: "t1.he.s1"}},
		{[]string{"renew", "t1.he.s1", "--by", "A", "--more"}, wire.Order{Verb: wire.VerbLearnStart, By: "A", Turns: 600, Subject: "t1.he.s1", Add: true}},
		{[]string{"accept", "--by", "A"}, wire.Order{Verb: wire.VerbLearnAccept, By: "A"}},
	} {
		out, err := baselineTool(t, append(c.args, "--daemon", srv.URL)...)
		has(t, c.args[0], out, err, "said of "+c.want.Verb)
		if last := got[len(got)-1]; last != c.want {
			t.Errorf("%v gives %+v", c.args, last)
		}
	}
	mux.HandleFunc("POST /api/v1/baselines", func(w http.ResponseWriter, r *http.Request) {
		raw, _ := io.ReadAll(r.Body)
		if q := r.URL.Query(); string(raw) != "file" || q.Get("by") != "A" || q.Get("reason") != "new computer & more" || q.Get("other_skid") != "yes" || r.Header.Get(panel.OrderHeader) != "tool" {
			t.Errorf("import of %q with %v", raw, q)
		}
		_ = json.NewEncoder(w).Encode(wire.Receipt{Version: 1, Act: wire.Act{Type: "act", Accepted: true, Said: "it waits"}, OnDisk: true})
	})
	file := filepath.Join(t.TempDir(), "b.json")
	if err := os.WriteFile(file, []byte("file"), 0o644); err != nil {
		t.Fatal(err)
	}
	out, err := baselineTool(t, "import", file, "--by", "A", "--reason", "new computer & more", "--other-skid", "--daemon", srv.URL)
	has(t, "import", out, err, "it waits")
	if _, err := baselineTool(t, "drop", "--by", "A", "--daemon", srv.URL); err == nil || !strings.Contains(err.Error(), "refused: said of learn-drop") {
		t.Errorf("a refused order: %v", err)
	}
	if _, err := baselineTool(t, "accept", "--daemon", srv.URL); err == nil {
		t.Error("an order of nobody")
	}
	out, err = baselineTool(t, "status", "--daemon", srv.URL)
	has(t, "status", out, err, "it waits", "t1     2          40 of 600  1.80–2.60", "560 more steady turns", "doubt: t1.he.suction may leak")
}
