package panel

import (
	"context"
	"encoding/json"
	"net/http"
	"net/http/httptest"
	"regexp"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/wire"
)

// newLoopback is a test server on loopback.
func newLoopback(t *testing.T, h http.Handler) *httptest.Server {
	t.Helper()
	return httptest.NewServer(h)
}

// noted takes down what is registered.
type noted struct{ patterns []string }

func (n *noted) HandleFunc(pattern string, _ func(http.ResponseWriter, *http.Request)) {
	n.patterns = append(n.patterns, pattern)
}

// complete is a source with everything that a source may have.
type complete struct{ posing }

func (*complete) Learning() *wire.Learning            { return nil }
func (*complete) Baselines() ([]wire.Baseline, error) { return nil, nil }
func (*complete) Baseline(uint64) ([]byte, error)     { return nil, ErrNoBaseline }
func (*complete) Import(context.Context, []byte, bool, wire.Order) (wire.Receipt, error) {
	return wire.Receipt{}, nil
}

// Every route of the API is described, and everything described is there.
func TestOpenAPIIsTheAPI(t *testing.T) {
	var n noted
	src := &complete{}
	src.now = full()
	routeAll(&n, src, newPulls(src, nopLog()), nopLog(), make(chan struct{}))
	var have, want []string
	for _, p := range n.patterns {
		if _, path, _ := strings.Cut(p, " "); strings.HasPrefix(path, "/api/") || path == "/metrics" {
			have = append(have, p)
		}
	}
	var doc struct {
		OpenAPI string `json:"openapi"`
		Paths   map[string]map[string]struct {
			Summary    string
			Parameters []struct{ Name, In string }
			Responses  map[string]json.RawMessage
		}
		Components map[string]map[string]json.RawMessage
	}
	if err := json.Unmarshal(openAPIText, &doc); err != nil || !strings.HasPrefix(doc.OpenAPI, "3.1.") {
		t.Fatalf("%v, version %q", err, doc.OpenAPI)
	}
	for path, ops := range doc.Paths {
		for method, op := range ops {
			want = append(want, strings.ToUpper(method)+" "+path)
			if op.Summary == "" || len(op.Responses) < 2 {
				t.Errorf("%s %s says too little", method, path)
			}
			var in, named []string
			for _, m := range regexp.MustCompile(`\{(\w+)\}`).FindAllStringSubmatch(path, -1) {
				in = append(in, m[1])
			}
			for _, p := range op.Parameters {
				if p.In == "path" {
					named = append(named, p.Name)
				}
			}
			if !slices.Equal(in, named) {
				t.Errorf("%s has %v in its path and describes %v", path, in, named)
			}
		}
	}
	slices.Sort(have)
	slices.Sort(want)
	for _, p := range have {
		if !slices.Contains(want, p) {
			t.Errorf("%s is not described", p)
		}
	}
	for _, p := range want {
		if !slices.Contains(have, p) {
			t.Errorf("%s is described and not there", p)
		}
	}
	for _, m := range regexp.MustCompile(`"#/components/(\w+)/(\w+)"`).FindAllSubmatch(openAPIText, -1) {
		if doc.Components[string(m[1])][string(m[2])] == nil {
			t.Errorf("%s leads nowhere", m[0])
		}
	}
	names := wire.SchemaNames()
	for _, m := range regexp.MustCompile(`"/api/v1/schemas/([a-z-]+)"`).FindAllSubmatch(openAPIText, -1) {
		if !slices.Contains(names, string(m[1])) {
			t.Errorf("there is no schema %s", m[1])
		}
	}
}

// The answers have the fields that are described as required, and no others than are described.
func TestAnswersAreAsDescribed(t *testing.T) {
	var doc struct {
		Components struct {
			Schemas map[string]struct {
				Required   []string
				Properties map[string]json.RawMessage
			}
		}
	}
	if err := json.Unmarshal(openAPIText, &doc); err != nil {
		t.Fatal(err)
	}
	h := guard(routes(posed(), nopLog()))
	for name, path := range map[string]string{"Now": "/api/v1/now", "Look": "/api/v1/throws/t1/look", "Signal": "/api/v1/channels/a7/signal", "Clip": "/api/v1/clips", "Throw": "/api/v1/throws", "Area": "/api/v1/throws/t1/charts/pv.json"} {
		w := httptest.NewRecorder()
		h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://127.0.0.1"+path, nil))
		raw := json.RawMessage(w.Body.Bytes())
		var many []json.RawMessage
		if json.Unmarshal(raw, &many) == nil && len(many) > 0 {
			raw = many[0]
		}
		var got map[string]json.RawMessage
		if err := json.Unmarshal(raw, &got); err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		s := doc.Components.Schemas[name]
		for _, f := range s.Required {
			if got[f] == nil {
				t.Errorf("%s has no %s", name, f)
			}
		}
		for f := range got {
			if s.Properties[f] == nil {
				t.Errorf("%s: %s is not described", name, f)
			}
		}
	}
}
