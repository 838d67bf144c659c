package panel

import (
	"context"
	"errors"
	"fmt"
	"net/http"
	"strings"
	"testing"

	"lapwing/internal/wire"
)

// school is a source that has learning runs.
type school struct {
	Source
	raw   string
	order wire.Order
	other bool
}

func (*school) Now() *wire.Now           { return &wire.Now{} }
func (*school) Learning() *wire.Learning { return &wire.Learning{State: "none", Said: "nothing"} }
func (*school) Baselines() ([]wire.Baseline, error) {
	return []wire.Baseline{{ID: 1}}, errors.New("one of them cannot be read")
}

func (*school) Baseline(id uint64) ([]byte, error) {
	if id != 1 {
		return nil, fmt.Errorf("%d: %w", id, ErrNoBaseline)
	}
	return []byte(`{"version":1}`), nil
}

func (s *school) Import(_ context.Context, raw []byte, other bool, o wire.Order) (wire.Receipt, error) {
	s.raw, s.order, s.other = string(raw), o, other
	return wire.Receipt{Act: wire.Act{Type: "act", Said: "refused for a test"}}, nil
}

func TestLearningAPI(t *testing.T) {
	s := &school{}
	p, err := Open("127.0.0.1:0", s, nil)
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan error, 1)
	go func() { done <- p.Serve() }()
	defer func() {
		if err := errors.Join(p.Close(), <-done); err != nil {
			t.Error(err)
		}
	}()
	ask := func(method, path, body string, header ...string) (int, string) {
		t.Helper()
		req, err := http.NewRequestWithContext(t.Context(), method, strings.TrimSuffix(p.URL(), "/")+path, strings.NewReader(body))
		if err != nil {
			t.Fatal(err)
		}
		for i := 0; i+1 < len(header); i += 2 {
			req.Header.Set(header[i], header[i+1])
		}
		resp, err := http.DefaultClient.Do(req)
		if err != nil {
			t.Fatal(err)
		}
		defer resp.Body.Close()
		b := make([]byte, 4096)
		n, _ := resp.Body.Read(b)
		return resp.StatusCode, string(b[:n])
	}
	for _, c := range []struct {
		method, path string
		header       []string
		status       int
		part         string
	}{
		{"GET", "/api/v1/learning", nil, 200, `"said":"nothing"`},
		{"GET", "/api/v1/baselines", nil, 200, `"id":1`},
		{"GET", "/api/v1/baselines/1", nil, 200, `{"version":1}`},
		{"GET", "/api/v1/baselines/2", nil, 404, "no such baseline"},
		{"GET", "/api/v1/baselines/x", nil, 400, "number"},
		{"POST", "/api/v1/learning", nil, 405, "read only"},
		{"POST", "/api/v1/baselines/1", nil, 405, "read only"},
		{"POST", "/api/v1/baselines?by=A", nil, 403, OrderHeader},
		{"POST", "/api/v1/baselines?by=A", []string{OrderHeader, "tool"}, 415, "application/json"},
		{"POST", "/api/v1/baselines?by=A", []string{OrderHeader, "tool", "Content-Type", "application/json", "Origin", "http://elsewhere.example"}, 403, "other sites"},
		{"POST", "/api/v1/baselines?by=A&reason=r&other_skid=yes", []string{OrderHeader, "tool", "Content-Type", "application/json"}, 409, "refused for a test"},
	} {
		status, body := ask(c.method, c.path, "file", c.header...)
		if status != c.status || !strings.Contains(body, c.part) {
			t.Errorf("%s %s %v: %d %q, want %d with %q", c.method, c.path, c.header, status, body, c.status, c.part)
		}
		if c.status != 409 && s.raw != "" {
			t.Errorf("%s %s %v came through", c.method, c.path, c.header)
		}
	}
	if s.raw != "file" || !s.other || s.order != (wire.Order{Verb: wire.VerbImport, By: "A", Reason: "r", Via: "tool"}) {
		t.Errorf("imported %q, %v, %+v", s.raw, s.other, s.order)
	}
}
