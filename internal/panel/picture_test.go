package panel

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"image/png"
	"math"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"
	"time"

	"lapwing/internal/chart"
	"lapwing/internal/wire"
)

// posing is a still source that can be looked at.
type posing struct {
	still
	mu        sync.Mutex
	turn      int64 // the next look's; 0: none yet
	asked     int
	reference *Look
	signal    *Signal
}

func (p *posing) Throws() []Throw {
	return []Throw{{ID: "t1", Stage: 1, Ends: []string{"he", "ce"}, Channels: []string{"p_he", "a1"}}}
}

func (p *posing) Look(throw string) *Look {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.asked++
	if throw != "t1" || p.turn == 0 {
		return nil
	}
	return pose(p.turn)
}

func (p *posing) Reference(_ context.Context, throw string) (*Look, error) {
	if p.reference == nil {
		return nil, fmt.Errorf("test: %w", ErrNoReference)
	}
	return p.reference, nil
}

func (p *posing) Signal(channel string) *Signal {
	if p.signal == nil || channel != p.signal.Channel {
		return nil
	}
	return p.signal
}

// pose is a turn of a cylinder that closes, compresses by pV^1.3 and opens nothing.
func pose(turn int64) *Look {
	const n = 841
	c := chart.Cylinder{Name: "t1", About: fmt.Sprintf("turn %d", turn), Lo: -30, Step: .5}
	for e := range c.Ends {
		end := &chart.End{P: make([]float64, n), V: make([]float64, n), LinePs: 5e5, LinePd: 12e5, State: "following"}
		for i := range n {
			a := (c.Lo + float64(i)*c.Step + 180*float64(e)) * math.Pi / 180
			end.V[i] = 1e-3 * (1.2 - math.Cos(a))
			end.P[i] = 5e5 * math.Pow(2.2e-3/end.V[i], 1.3)
		}
		end.P[0] = math.NaN()
		end.Events = []chart.Event{{Opens: true, Angle: 120, Expected: 119, Lo: 118, Hi: 131, Sure: true}, {Suction: true, Angle: math.NaN(), Expected: math.NaN(), Lo: 170, Hi: 200}}
		c.Ends[e] = end
	}
	c.Vib = []chart.Vib{{Channel: "a1", Peak: make([]float64, n)}}
	c.Vib[0].Peak[300] = 98.0665
	x := 5.02
	rec := throw("t1", "following")
	return &Look{Throw: "t1", Turn: turn, At: at, Picture: c, Record: &rec, Measures: []wire.WhyMeasure{
		{Measure: "t1.he/p_suction_bar_abs", Value: &x, Expected: ptr(5), Spread: ptr(.01), Spreads: ptr(2)}, {Measure: "t1.ce/flow_balance", Value: ptr(1.2), Expected: ptr(1), Spread: ptr(.02), Spreads: ptr(10)},
		{Measure: "t1/reversal_deg", Value: ptr(80)}, {Measure: "t1.he.suction.opens/peak_g", Value: ptr(11)}}}
}

func posed() *posing {
	return &posing{still: still{now: full()}, turn: 7, signal: &Signal{Channel: "a7", Kind: "acceleration", Unit: "g", Density: "g²/Hz", Rate: 20000, Seq0: 400, At: at, Full: [2]float64{-50, 50}, V: tone1k()}}
}

// tone1k is a second of 1 kHz of 2 g about 1 g.
func tone1k() []float64 {
	v := make([]float64, 20000)
	for i := range v {
		v[i] = 1 + 2*math.Sin(2*math.Pi*1000*float64(i)/20000)
	}
	return v
}

func TestLookAPI(t *testing.T) {
	src := posed()
	h := guard(routes(src, nopLog()))
	get := func(path string) *httptest.ResponseRecorder {
		w := httptest.NewRecorder()
		h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://127.0.0.1"+path, nil))
		return w
	}
	var l lookJSON
	if w := get("/api/v1/throws/t1/look"); w.Code != 200 || json.Unmarshal(w.Body.Bytes(), &struct {
		Ends []struct {
			P []*float64 `json:"p_bar_abs"`
		} `json:"ends"`
	}{}) != nil || strings.Contains(w.Body.String(), "NaN") || !strings.Contains(w.Body.String(), `"p_bar_abs":[null,`) {
		t.Fatalf("%d %.200s", w.Code, w.Body)
	} else if err := json.Unmarshal([]byte(strings.ReplaceAll(w.Body.String(), "null", "0")), &l); err != nil || l.Turn != 7 || l.From != -30 || len(l.Ends) != 2 || l.Vib[0].Peak[300] != 10 || l.Ends[0].Windows[0].Event != "discharge.opens" {
		t.Errorf("%v %+v", err, l)
	}
	// The areas tell where the crank angle of 120° lies on the drawing, and the drawing has no script.
	w := get("/api/v1/throws/t1/charts/angle.json?turn=7")
	var areas []chart.Area
	if err := json.Unmarshal(w.Body.Bytes(), &areas); err != nil || len(areas) != 3 || areas[0].X != [2]float64{-30, 390} || areas[1].Name != "windows" {
		t.Errorf("areas %v: %s", err, w.Body)
	}
	svg := get("/api/v1/throws/t1/charts/angle.svg?turn=7&theme=night&size=narrow")
	if svg.Header().Get("Content-Type") != "image/svg+xml" || !bytes.Contains(svg.Body.Bytes(), []byte("</svg>")) || bytes.Contains(svg.Body.Bytes(), []byte("<script")) {
		t.Errorf("svg: %d %s", svg.Code, svg.Header().Get("Content-Type"))
	}
	if d := get("/api/v1/throws/t1/charts/logpv.png?download"); d.Header().Get("Content-Disposition") != `attachment; filename="t1-logpv-turn-7.png"` {
		t.Errorf("download %v", d.Header())
	} else if _, err := png.Decode(d.Body); err != nil {
		t.Error(err)
	}
	for _, c := range []struct {
		path string
		want int
	}{
		{"t1/charts/angle.svg?turn=8", 404}, {"t1/charts/angle.svg?turn=x", 400}, {"t1/charts/angle.bmp", 400}, {"t1/charts/pie.svg", 400}, {"t1/charts/angle.svg?theme=pink", 400}, {"t1/charts/angle.svg?size=huge", 400},
		{"t1/charts/load.svg", 422}, {"t9/charts/angle.svg", 404}, {"t9/look", 404}, {"t1/look?turn=-3", 400}, {"t1/charts/pv.svg?reference=clip", 404}, {"t1/charts/pv.svg?reference=99", 404}, {"t1/charts/pv.svg?reference=x", 400}, {"t1/charts/pv.svg?reference=7", 200},
	} {
		if w := get("/api/v1/throws/" + c.path); w.Code != c.want {
			t.Errorf("%s: %d, want %d: %.100s", c.path, w.Code, c.want, w.Body)
		}
	}
	src.reference = pose(3)
	a, b := get("/api/v1/throws/t1/charts/pv.svg?reference=clip").Body.String(), get("/api/v1/throws/t1/charts/pv.svg").Body.String()
	if !strings.Contains(a, "reference: turn 3") || strings.Contains(b, "reference") {
		t.Error("the reference is not on the drawing, or stays on the next")
	}
}

func TestChannelAPI(t *testing.T) {
	h := guard(routes(posed(), nopLog()))
	get := func(path string) *httptest.ResponseRecorder {
		w := httptest.NewRecorder()
		h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://127.0.0.1/api/v1/channels/"+path, nil))
		return w
	}
	var s struct {
		Lo   float64 `json:"lowest"`
		Hi   float64 `json:"highest"`
		Mean float64 `json:"mean"`
		RMS  float64 `json:"rms_about_mean"`
		V    []float64
	}
	if err := json.Unmarshal(get("a7/signal").Body.Bytes(), &s); err != nil || math.Abs(s.RMS-math.Sqrt2) > 1e-9 || math.Abs(s.Mean-1) > 1e-9 || math.Abs(s.Hi-3) > 1e-9 || math.Abs(s.Lo+1) > 1e-9 {
		t.Errorf("%v %+v: a sine of amplitude 2 about 1 has an RMS of √2", err, s)
	}
	for _, f := range []string{"signal.svg", "spectrum.svg?theme=night", "spectrum.json"} {
		if w := get("a7/charts/" + f); w.Code != 200 {
			t.Errorf("%s: %d %s", f, w.Code, w.Body)
		}
	}
	if w := get("a7/charts/angle.svg"); w.Code != 400 {
		t.Errorf("%d", w.Code)
	}
}

func TestCylinderPage(t *testing.T) {
	src := posed()
	page := drawPage(t, src, "/cylinder/t1")
	keep(t, "cylinder", page)
	contains(t, page, `<a href="/cylinder/t1" aria-current="page">Throw t1</a>`, `/api/v1/throws/t1/charts/angle.svg?turn=7&amp;size=screen&amp;theme=night`, `<h2 id="numbers">Turn 7 in numbers</h2>`,
		`suction plateau<small class="soft">bar abs</small></th><td><span>5.020</span><small class="soft">5.000 ± 0.010, &#43;2.0</small></td>`, `<td class="advisory"><span class="tone">● 1.200</span>`, "All 4 measures", "t1.he.suction.opens", "t1.he.discharge.opens", "298.4 to 314.4")
	lacks(t, page, `data-kind="load"`)
	for _, path := range []string{"/cylinder/t9", "/channels/none"} {
		w := httptest.NewRecorder()
		guard(routes(src, nopLog())).ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://127.0.0.1"+path, nil))
		if w.Code != 404 {
			t.Errorf("%s: %d", path, w.Code)
		}
	}
	contains(t, drawPage(t, src, "/channels/a7"), "1.414 g", "▲ failure", "−50 to 50 g, 4 % of it used")
}

// Many pages get the same turn and one drawing; what is held is bounded, and what is asked for stays.
func TestPicturesAreShared(t *testing.T) {
	src := posed()
	p := newPictures(src)
	now := at
	p.now = func() time.Time { return now }
	for range 10 {
		if l, err := p.look(t.Context(), "t1", 0); err != nil || l.Turn != 7 {
			t.Fatal(l, err)
		}
		src.turn++
	}
	if src.asked != 1 {
		t.Errorf("ten pages within a second asked the line %d times", src.asked)
	}
	src.turn = 7
	made := 0
	of := drawingOf{throw: "t1", turn: 7, kind: "pv", format: chart.SVG}
	for range 10 {
		if _, err := p.draw(t.Context(), of, func() (*chart.Drawing, error) {
			made++
			return chart.PV(chart.Picture{Turns: []chart.Cylinder{pose(7).Picture}}, chart.Options{})
		}); err != nil {
			t.Fatal(err)
		}
	}
	if made != 1 {
		t.Errorf("drawn %d times", made)
	}
	for i := range 3 * looksHeld {
		now, src.turn = now.Add(2*newestFor), int64(100+i)
		if _, err := p.look(t.Context(), "t1", 0); err != nil {
			t.Fatal(err)
		}
		if _, err := p.look(t.Context(), "t1", 7); err != nil { // a frozen turn
			t.Fatalf("after %d more turns: %v", i, err)
		}
	}
	if n := len(p.looks["t1"]); n != looksHeld {
		t.Errorf("%d turns are held", n)
	}
	none := newPictures(&posing{})
	none.now = func() time.Time { now = now.Add(lookWait); return now }
	if _, err := none.look(t.Context(), "t1", 0); !errors.Is(err, errNoPicture) {
		t.Errorf("no turn yet: %v", err)
	}
	if _, err := p.look(t.Context(), "t1", 100); err == nil {
		t.Error("a turn nobody asked for is still held")
	}
}

// A pressure's spectrum ends where its gauge passage has nothing to say; an accelerometer's at half the rate.
func TestSpectrumsReach(t *testing.T) {
	for kind, want := range map[string]float64{"pressure": 3, "acceleration": 10} {
		s := *posed().signal
		s.Kind = kind
		d, err := newPictures(posed()).channelChart(t.Context(), drawingOf{throw: s.Channel, kind: "spectrum", format: chart.SVG}, &s)
		if err != nil || math.Abs(d.areas[0].X[1]-want) > .02 {
			t.Errorf("%s: %v, %+v, want %g kHz", kind, err, d, want)
		}
	}
}

// Whatever is asked for: either it says what is wrong, or it is one of the drawings that there are.
func FuzzChartQuery(f *testing.F) {
	for _, s := range []string{"angle.svg?turn=7", "pv.json?size=narrow&theme=night", "logpv.pdf?reference=7", "load.svg", ".svg?turn=-1", "angle?reference=clip", "angle.svg?turn=99999999999999999999", "pv.svg?size=&theme=&turn="} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		file, query, _ := strings.Cut(s, "?")
		r := httptest.NewRequest(http.MethodGet, "http://127.0.0.1/", nil)
		r.SetPathValue("file", file)
		r.URL.RawQuery = query
		of, areas, err := parseDrawing(r, kinds)
		if err == nil && (drawers[of.kind] == nil || mediaTypes[of.format] == "" || areas != strings.HasSuffix(file, ".json") || of.theme > chart.Night) {
			t.Errorf("%q is taken for %+v", s, of)
		}
		if n, err := turnOf(r.URL.Query().Get("turn")); err == nil && n < 0 {
			t.Errorf("%q is turn %d", s, n)
		}
	})
}
