package panel

import (
	"archive/tar"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"

	"lapwing/internal/wire"
)

var save = flag.String("save", "", "folder into which the drawn pages are written, for eyes")

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// still is a source that never changes.
type still struct {
	now     *wire.Now
	export  func(ctx context.Context, clip, dir string) error
	exports int
	order   func(ctx context.Context, o wire.Order) (wire.Receipt, error)
	ordered []wire.Order
	journal func(f wire.JournalFilter) (wire.JournalPage, error)
	asked   []wire.JournalFilter
	metrics []Family
}

func (s *still) Now() *wire.Now { return s.now }

func (s *still) Export(ctx context.Context, clip, dir string) error {
	s.exports++
	if s.export == nil {
		return fmt.Errorf("test: clip %q: %w", clip, ErrNoClip)
	}
	return s.export(ctx, clip, dir)
}

func (s *still) Order(ctx context.Context, o wire.Order) (wire.Receipt, error) {
	s.ordered = append(s.ordered, o)
	if s.order == nil {
		return wire.Receipt{Version: 1, Act: wire.Act{Type: "act", ID: 1, Verb: o.Verb, By: o.By, Via: o.Via, Accepted: true}, OnDisk: true}, nil
	}
	return s.order(ctx, o)
}

func (s *still) Journal(f wire.JournalFilter) (wire.JournalPage, error) {
	s.asked = append(s.asked, f)
	if s.journal == nil {
		return wire.JournalPage{Version: 1}, nil
	}
	return s.journal(f)
}

func (s *still) Why(_ context.Context, subject string, turn int64) (wire.Why, error) {
	if subject == "busy" {
		return wire.Why{}, ErrBusy
	}
	return wire.Why{Version: 1, Subject: subject, Turn: turn}, nil
}

func (s *still) Alarms() wire.Alarms { return wire.Alarms{Version: 1, Points: []wire.Point{}} }

func (s *still) Metrics() []Family { return s.metrics }

func open(t *testing.T, src Source) string {
	t.Helper()
	p, err := Open("127.0.0.1:0", src, nil)
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan error)
	go func() { done <- p.Serve() }()
	t.Cleanup(func() {
		http.DefaultClient.CloseIdleConnections()
		if err := p.Close(); err != nil {
			t.Error(err)
		}
		if err := <-done; err != nil {
			t.Error(err)
		}
	})
	return p.URL()
}

// ask sends one request; edit may change it.
func ask(t *testing.T, url string, edit func(*http.Request)) (*http.Response, string) {
	t.Helper()
	req, err := http.NewRequestWithContext(t.Context(), http.MethodGet, url, nil)
	if err != nil {
		t.Fatal(err)
	}
	if edit != nil {
		edit(req)
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil {
		t.Fatal(err)
	}
	return resp, string(b)
}

func TestOpenOnlyOnLoopback(t *testing.T) {
	for _, addr := range []string{"0.0.0.0:0", ":0", "[::]:0", "192.0.2.7:0", "example.org:80", "127.0.0.1.example.org:80"} {
		if p, err := Open(addr, &still{}, nil); err == nil || !strings.Contains(err.Error(), "not loopback") {
			t.Errorf("%s: %v", addr, err)
			if p != nil {
				p.Close()
			}
		}
	}
	if _, err := Open("8411", &still{}, nil); err == nil || !strings.Contains(err.Error(), "write 127.0.0.1:8411") {
		t.Errorf("no port: %v", err)
	}
	taken, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer taken.Close()
	if _, err := Open(taken.Addr().String(), &still{}, nil); err == nil || !strings.Contains(err.Error(), "in use") {
		t.Errorf("taken port: %v", err)
	}
	p, err := Open("localhost:0", &still{}, nil)
	if err != nil {
		t.Fatal(err)
	}
	p.Close()
}

func TestGuard(t *testing.T) {
	url := open(t, &still{now: full()})
	for _, c := range []struct {
		name string
		path string
		edit func(*http.Request)
		want int
	}{
		{"page", "", nil, 200},
		{"host localhost", "", func(r *http.Request) { r.Host = "localhost:8411" }, 200},
		{"host ::1", "", func(r *http.Request) { r.Host = "[::1]:8411" }, 200},
		{"host without port", "", func(r *http.Request) { r.Host = "127.0.0.1" }, 200},
		{"foreign host", "", func(r *http.Request) { r.Host = "example.org" }, 421},
		{"foreign host that looks near", "", func(r *http.Request) { r.Host = "127.0.0.1.example.org:8411" }, 421},
		{"network address", "", func(r *http.Request) { r.Host = "192.0.2.7:8411" }, 421},
		{"POST", "", func(r *http.Request) { r.Method = http.MethodPost }, 405},
		{"PUT on a clip", "api/v1/clips/a", func(r *http.Request) { r.Method = http.MethodPut }, 405},
		{"DELETE", "api/v1/clips/a", func(r *http.Request) { r.Method = http.MethodDelete }, 405},
		{"HEAD", "", func(r *http.Request) { r.Method = http.MethodHead }, 200},
		{"unknown path", "admin", nil, 404},
		{"API asked by another site's page", "api/v1/now", func(r *http.Request) { r.Header.Set("Sec-Fetch-Site", "cross-site") }, 403},
		{"page reached by a link", "", func(r *http.Request) { r.Header.Set("Sec-Fetch-Site", "cross-site") }, 200},
		{"API asked by the page", "api/v1/now", func(r *http.Request) { r.Header.Set("Sec-Fetch-Site", "same-origin") }, 200},
	} {
		t.Run(c.name, func(t *testing.T) {
			resp, _ := ask(t, url+c.path, c.edit)
			if resp.StatusCode != c.want {
				t.Errorf("status %d, want %d", resp.StatusCode, c.want)
			}
			for k, want := range map[string]string{"X-Content-Type-Options": "nosniff", "Referrer-Policy": "no-referrer", "Cache-Control": "no-store", "Cross-Origin-Resource-Policy": "same-origin",
				"Content-Security-Policy": "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self'; connect-src 'self'; form-action 'self'; frame-ancestors 'none'; base-uri 'none'"} {
				if got := resp.Header.Get(k); got != want {
					t.Errorf("%s is %q, want %q", k, got, want)
				}
			}
		})
	}
}

func TestAPI(t *testing.T) {
	url := open(t, &still{now: full()})
	resp, body := ask(t, url+"api/v1/now", nil)
	var n wire.Now
	if err := json.Unmarshal([]byte(body), &n); err != nil || resp.Header.Get("Content-Type") != "application/json" {
		t.Fatalf("%v, %s", err, resp.Header.Get("Content-Type"))
	}
	if n.Skid != "heron-meadow" || len(n.Standing) != 3 || n.Latest == nil || n.Latest.Turn != 48211 || len(n.Clips) != 2 {
		t.Errorf("came back as %+v", n)
	}
	_, body = ask(t, url+"api/v1/clips", nil)
	var clips []wire.Clip
	if err := json.Unmarshal([]byte(body), &clips); err != nil || len(clips) != 2 || clips[0].ID != "20260301T100300Z-31" {
		t.Errorf("%v: %+v", err, clips)
	}
	empty := open(t, &still{now: &wire.Now{}})
	if _, body := ask(t, empty+"api/v1/now", nil); strings.Contains(body, "null") || strings.Contains(body, "0001-") {
		t.Errorf("a snapshot of nothing says %s", body)
	}
	if _, body := ask(t, empty+"api/v1/clips", nil); body != "[]\n" {
		t.Errorf("no clips: %q", body)
	}
	nan := math.NaN()
	broken := open(t, &still{now: &wire.Now{Health: wire.Health{RPM: &nan}}})
	if resp, body := ask(t, broken+"api/v1/now", nil); resp.StatusCode != 500 || strings.Contains(body, "NaN") {
		t.Errorf("a snapshot that cannot be written: %d %q", resp.StatusCode, body)
	}
}

func TestClip(t *testing.T) {
	want := map[string]string{"clip.wav": "RIFF and so on", "clip.skid.yaml": "machine: {}\n", "clip.json": "{}"}
	var scratch string
	src := &still{now: full(), export: func(_ context.Context, clip, dir string) error {
		scratch = dir
		if clip != "20260301T100300Z-31" {
			return fmt.Errorf("test: %w", ErrNoClip)
		}
		for name, text := range want {
			if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o600); err != nil {
				return err
			}
		}
		return nil
	}}
	url := open(t, src)
	resp, body := ask(t, url+"api/v1/clips/20260301T100300Z-31", nil)
	if resp.StatusCode != 200 || resp.Header.Get("Content-Type") != "application/x-tar" || resp.Header.Get("Content-Disposition") != `attachment; filename="lapwing-20260301T100300Z-31.tar"` {
		t.Fatalf("status %d, %v", resp.StatusCode, resp.Header)
	}
	got := map[string]string{}
	for r := tar.NewReader(strings.NewReader(body)); ; {
		h, err := r.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		b, err := io.ReadAll(r)
		if err != nil {
			t.Fatal(err)
		}
		if !filepath.IsLocal(h.Name) || strings.Contains(h.Name, "/") {
			t.Errorf("a file named %q", h.Name)
		}
		got[h.Name] = string(b)
	}
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("unpacked %v, want %v", got, want)
	}
	if _, err := os.Stat(scratch); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the scratch folder is left: %v", err)
	}
	if resp, body := ask(t, url+"api/v1/clips/unknown", nil); resp.StatusCode != 404 || body != "no such clip\n" {
		t.Errorf("unknown clip: %d %q", resp.StatusCode, body)
	}
	if _, err := os.Stat(scratch); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the scratch folder is left: %v", err)
	}
}

// A name that could lead out of a folder never reaches the source.
func TestClipNames(t *testing.T) {
	src := &still{now: full()}
	url := open(t, src)
	for _, id := range []string{"..%2f..%2fetc%2fpasswd", "%2e%2e", "..%5c..%5cx", ".hidden", "a%00b", "a%2fb", "%2fetc%2fpasswd", "a%20b", "~", strings.Repeat("a", 129)} {
		resp, body := ask(t, url+"api/v1/clips/"+id, nil)
		if resp.StatusCode != 404 || strings.Contains(body, "passwd") {
			t.Errorf("%s: %d %q", id, resp.StatusCode, body)
		}
	}
	if src.exports != 0 {
		t.Errorf("%d names reached the source", src.exports)
	}
	if resp, _ := ask(t, url+"api/v1/clips/20260301T100300Z-31", nil); resp.StatusCode != 404 || src.exports != 1 {
		t.Errorf("a good name: %d, %d exports", resp.StatusCode, src.exports)
	}
}

func TestClipThatFails(t *testing.T) {
	src := &still{now: full(), export: func(context.Context, string, string) error {
		return errors.New("open /var/lib/secret-place: no space left")
	}}
	resp, body := ask(t, open(t, src)+"api/v1/clips/a", nil)
	if resp.StatusCode != 500 || strings.Contains(body, "secret-place") || !strings.Contains(body, "see the log") {
		t.Errorf("%d %q", resp.StatusCode, body)
	}
}

func TestExportsAreFew(t *testing.T) {
	in, out := make(chan struct{}), make(chan struct{})
	src := &blocked{still: still{now: full()}, in: in, out: out}
	h := routes(src, nopLog())
	done := make(chan int)
	for range exports {
		go func() {
			w := httptest.NewRecorder()
			h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "/api/v1/clips/a", nil))
			done <- w.Code
		}()
		<-in
	}
	w := httptest.NewRecorder()
	h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "/api/v1/clips/a", nil))
	if w.Code != http.StatusServiceUnavailable || w.Header().Get("Retry-After") == "" {
		t.Errorf("one too many: %d", w.Code)
	}
	for range exports {
		out <- struct{}{}
		if code := <-done; code != 200 {
			t.Errorf("status %d", code)
		}
	}
}

type blocked struct {
	still
	in, out chan struct{}
}

func (b *blocked) Export(context.Context, string, string) error {
	b.in <- struct{}{}
	<-b.out
	return nil
}

// keep writes a page for eyes when asked to.
func keep(t *testing.T, name, body string) {
	t.Helper()
	if *save == "" {
		return
	}
	if err := os.WriteFile(filepath.Join(*save, name+".html"), []byte(body), 0o644); err != nil {
		t.Fatal(err)
	}
}

var at = time.Date(2026, 3, 1, 10, 26, 0, 0, time.UTC)
