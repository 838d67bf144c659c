package panel

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// Pull of the tests' source: two files of what was asked.
func (s *still) Pull(_ context.Context, q wire.PullQuery, dir string) error {
	switch q.Clip {
	case "gone":
		return fmt.Errorf("x: %w", ErrNoClip)
	case "odd":
		return fmt.Errorf("%w: too long", ErrQuery)
	case "broken":
		return errors.New("disk")
	}
	return errors.Join(os.WriteFile(filepath.Join(dir, "a.wav"), bytes.Repeat([]byte(q.Values().Encode()), 1000), 0o600),
		os.WriteFile(filepath.Join(dir, "a.json"), []byte("{}"), 0o600))
}

func TestPull(t *testing.T) {
	src := &still{}
	p := newPulls(src, nopLog())
	now := time.Unix(1e9, 0)
	p.now = func() time.Time { return now }
	mux := http.NewServeMux()
	p.routes(mux)
	get := func(path string, head ...string) *httptest.ResponseRecorder {
		r := httptest.NewRequest(http.MethodGet, "http://127.0.0.1"+path, nil)
		for i := 0; i+1 < len(head); i += 2 {
			r.Header.Set(head[i], head[i+1])
		}
		w := httptest.NewRecorder()
		mux.ServeHTTP(w, r)
		return w
	}
	ask := func(query string) (list wire.Pulled) {
		t.Helper()
		w := get("/api/v1/pull?" + query)
		if w.Code != http.StatusOK || json.Unmarshal(w.Body.Bytes(), &list) != nil {
			t.Fatalf("%s: %d %s", query, w.Code, w.Body)
		}
		return list
	}
	list := ask("turns=3:9")
	if len(list.Files) != 2 || list.Files[1].Name != "a.wav" {
		t.Fatalf("%+v", list)
	}
	path := "/api/v1/pull/" + list.Key + "/a.wav"
	whole := get(path).Body.Bytes()
	sum := sha256.Sum256(whole)
	if int64(len(whole)) != list.Files[1].Bytes || hex.EncodeToString(sum[:]) != list.Files[1].SHA256 {
		t.Errorf("%d bytes, %+v", len(whole), list.Files[1])
	}
	// A transfer that broke goes on.
	rest := get(path, "Range", "bytes=1000-", "If-Range", `"`+list.Files[1].SHA256+`"`)
	if rest.Code != http.StatusPartialContent || !bytes.Equal(rest.Body.Bytes(), whole[1000:]) {
		t.Errorf("range: %d, %d bytes of %d", rest.Code, rest.Body.Len(), len(whole)-1000)
	}
	if other := get(path, "Range", "bytes=1000-", "If-Range", `"other"`); other.Code != http.StatusOK {
		t.Errorf("a range of other contents: %d", other.Code)
	}
	// The same question finds the same files.
	if again := ask("turns=3:9"); again.Key != list.Key {
		t.Errorf("asked again: %s, %s", again.Key, list.Key)
	}
	if a, b := ask("clip=c1"), ask("clip=c1"); a.Key != b.Key {
		t.Error("a clip that has not changed got another key")
	}
	// What nobody touches goes, and never more than a few are held.
	for i := range 6 {
		now = now.Add(time.Second)
		ask(fmt.Sprintf("turns=%d:99", i))
	}
	if w := get(path); w.Code != http.StatusNotFound {
		t.Errorf("pushed out: %d", w.Code)
	}
	last := ask("turns=5:99")
	now = now.Add(pullKeep + time.Second)
	if w := get("/api/v1/pull/" + last.Key + "/a.wav"); w.Code != http.StatusNotFound {
		t.Errorf("expired: %d", w.Code)
	}
	held := ask("clip=c1")
	dir := p.held[held.Key].dir
	p.close()
	if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a scratch folder stays: %v", err)
	}
	for query, code := range map[string]int{"clip=gone": 404, "clip=odd": 400, "clip=broken": 500, "": 400, "turns=9:3": 400} {
		if w := get("/api/v1/pull?" + query); w.Code != code {
			t.Errorf("%q: %d, want %d", query, w.Code, code)
		}
	}
	for _, odd := range []string{"/api/v1/pull/" + held.Key + "/..%2fx", "/api/v1/pull/x/a.wav"} {
		if w := get(odd); w.Code != http.StatusNotFound {
			t.Errorf("%s: %d", odd, w.Code)
		}
	}
}
