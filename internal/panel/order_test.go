package panel

import (
	"context"
	"errors"
	"net/http"
	"strings"
	"testing"

	"lapwing/internal/wire"
)

// post sends an order as lapwing itself would; edit may spoil it.
func post(t *testing.T, url, body string, edit func(*http.Request)) (*http.Response, string) {
	t.Helper()
	return ask(t, url+"api/v1/orders", func(r *http.Request) {
		fresh, err := http.NewRequestWithContext(t.Context(), http.MethodPost, r.URL.String(), strings.NewReader(body))
		if err != nil {
			t.Fatal(err)
		}
		*r = *fresh
		r.Header.Set("Content-Type", "application/json")
		r.Header.Set(OrderHeader, "tool")
		if edit != nil {
			edit(r)
		}
	})
}

const good = `{"verb":"acknowledge","key":"t1.he.suction/leaking","by":"A. Operator"}`

// What a browser can be tricked into sending never reaches the source, and neither does what is not understood.
func TestOrdersAreGuarded(t *testing.T) {
	src := &still{now: full()}
	url := open(t, src)
	own := strings.TrimSuffix(url, "/")
	for name, c := range map[string]struct {
		body string
		edit func(*http.Request)
		want int
	}{
		"no header":            {good, func(r *http.Request) { r.Header.Del(OrderHeader) }, 403},
		"header of a stranger": {good, func(r *http.Request) { r.Header.Set(OrderHeader, "mqtt") }, 403},
		"a form":               {good, func(r *http.Request) { r.Header.Set("Content-Type", "application/x-www-form-urlencoded") }, 415},
		"text that looks like": {good, func(r *http.Request) { r.Header.Set("Content-Type", "text/plain; application/json") }, 415},
		"no type":              {good, func(r *http.Request) { r.Header.Del("Content-Type") }, 415},
		"another origin":       {good, func(r *http.Request) { r.Header.Set("Origin", "http://example.org") }, 403},
		"another port":         {good, func(r *http.Request) { r.Header.Set("Origin", "http://127.0.0.1:1") }, 403},
		"no origin at all":     {good, func(r *http.Request) { r.Header.Set("Origin", "null") }, 403},
		"another site":         {good, func(r *http.Request) { r.Header.Set("Sec-Fetch-Site", "cross-site") }, 403},
		"another place here":   {good, func(r *http.Request) { r.Header.Set("Sec-Fetch-Site", "same-site") }, 403},
		"foreign host":         {good, func(r *http.Request) { r.Host = "example.org" }, 421},
		"PUT":                  {good, func(r *http.Request) { r.Method = http.MethodPut }, 405},
		"GET":                  {"", func(r *http.Request) { r.Method = http.MethodGet }, 405},
		"unknown field":        {`{"verb":"acknowledge","force":true}`, nil, 400},
		"two orders":           {good + good, nil, 400},
		"no JSON":              {"acknowledge", nil, 400},
		"nothing":              {"", nil, 400},
		"a list":               {"[" + good + "]", nil, 400},
		"too long":             {`{"verb":"acknowledge","reason":"` + strings.Repeat("x", wire.MaxOrder) + `"}`, nil, 413},
		"wrong type":           {`{"verb":7}`, nil, 400},
		"a header of its own":  {`{"verb":"acknowledge","Via":"mqtt"}`, nil, 400},
	} {
		t.Run(name, func(t *testing.T) {
			resp, body := post(t, url, c.body, c.edit)
			if resp.StatusCode != c.want {
				t.Errorf("status %d (%s), want %d", resp.StatusCode, strings.TrimSpace(body), c.want)
			}
			if len(src.ordered) != 0 {
				t.Errorf("the source was asked for %+v", src.ordered)
			}
		})
	}
	for _, edit := range []func(*http.Request){nil,
		func(r *http.Request) { r.Header.Set("Origin", own); r.Header.Set("Sec-Fetch-Site", "same-origin") },
		func(r *http.Request) { r.Header.Set("Content-Type", "application/json; charset=utf-8") }} {
		if resp, body := post(t, url, good, edit); resp.StatusCode != 200 || !strings.Contains(body, `"accepted":true`) {
			t.Errorf("a good order: %d %s", resp.StatusCode, body)
		}
	}
	if len(src.ordered) != 3 || src.ordered[0].Via != "tool" || src.ordered[0].By != "A. Operator" || src.ordered[0].Key != "t1.he.suction/leaking" {
		t.Errorf("arrived as %+v", src.ordered)
	}
}

func TestOrdersAnswered(t *testing.T) {
	src := &still{now: full()}
	url := open(t, src)
	for name, c := range map[string]struct {
		r    wire.Receipt
		err  error
		want int
		says string
	}{
		"refused": {wire.Receipt{Version: 1, Act: wire.Act{ID: 4, Said: "it is normal"}}, nil, 409, "it is normal"},
		"busy":    {wire.Receipt{}, ErrBusy, 503, "not carried out"},
		"ended":   {wire.Receipt{}, ErrNotRunning, 503, "has ended"},
		"broken":  {wire.Receipt{}, errors.New("/var/lib/secret-place"), 500, "see the log"},
	} {
		t.Run(name, func(t *testing.T) {
			src.order = func(context.Context, wire.Order) (wire.Receipt, error) { return c.r, c.err }
			resp, body := post(t, url, good, nil)
			if resp.StatusCode != c.want || !strings.Contains(body, c.says) || strings.Contains(body, "secret-place") {
				t.Errorf("%d %s", resp.StatusCode, body)
			}
		})
	}
}
