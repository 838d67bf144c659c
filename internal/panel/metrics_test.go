package panel

import (
	"bytes"
	"io"
	"math"
	"net/http"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/panel/paneltest"
)

// The reader must be able to say no.
func TestReaderOfMetricsRefuses(t *testing.T) {
	good := "# HELP a_seconds A.\n# TYPE a_seconds gauge\na_seconds{x=\"1\",y=\"\\\"\\n\"} 2\na_seconds{x=\"2\",y=\"\"} 3\n# HELP b_total B.\n# TYPE b_total counter\nb_total 1e+06\n"
	if _, err := paneltest.Read(good); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ name, from, to string }{
		{"no end", "1e+06\n", "1e+06"}, {"no help", "# HELP a_seconds A.\n", ""}, {"no type", "# TYPE a_seconds gauge\n", ""},
		{"counter without total", "gauge", "counter"}, {"gauge with total", "counter", "gauge"}, {"series twice", `x="2",y=""`, `x="1",y="\"\n"`},
		{"label twice", `x="2",y`, `x="2",x`}, {"quote in a label", `y="\"\n"`, `y="""`}, {"escape that is none", `\n"} 2`, `\t"} 2`}, {"blank line", "# TYPE b", "\n# TYPE b"},
		{"no value", "1e+06", ""}, {"NaN word", "1e+06", "nan"}, {"family twice", "b_total", "a_seconds"}, {"milliseconds", "a_seconds", "a_ms"}, {"negative counter", "1e+06", "-1"},
		{"sample of another", "\nb_total 1", "\nc_total 1"},
	} {
		bad := strings.ReplaceAll(good, c.from, c.to)
		if bad == good {
			t.Fatalf("%s: nothing was changed", c.name)
		}
		if _, err := paneltest.Read(bad); err == nil {
			t.Errorf("%s is let through:\n%s", c.name, bad)
		}
	}
}

// Whatever a label or help text holds, what is written is read back as it was.
func TestMetricsText(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		values := rapid.SliceOfNDistinct(rapid.String(), 1, 5, rapid.ID[string]).Draw(rt, "labels")
		v := rapid.Float64().Draw(rt, "value")
		f := Family{Name: "lapwing_x", Help: rapid.StringN(1, 40, -1).Draw(rt, "help")}
		for _, l := range values {
			f.Series = append(f.Series, Series{Labels: []Label{{"skid", "s"}, {"reason", l}}, Value: v})
		}
		var b bytes.Buffer
		if err := writeMetrics(&b, []Family{f}); err != nil {
			rt.Fatal(err)
		}
		e, err := paneltest.Read(b.String())
		if err != nil {
			rt.Fatalf("%v\n%s", err, b.String())
		}
		if len(e.Series) != len(values) {
			rt.Fatalf("%d series of %d", len(e.Series), len(values))
		}
		have := map[string]bool{}
		for k, ls := range e.Labels {
			have[ls["reason"]] = true
			if e.Series[k] != v {
				rt.Fatalf("%v became %v", v, e.Series[k])
			}
		}
		for _, l := range values {
			if !have[strings.ToValidUTF8(l, "\uFFFD")] {
				rt.Fatalf("label %q is gone:\n%s", l, b.String())
			}
		}
	})
}

// One family that is not in order costs no other, and says so.
func TestMetricsRefuseWhatAScraperWould(t *testing.T) {
	fine := Family{Name: "lapwing_b", Help: "B.", Series: []Series{{Value: 1}}}
	twin := []Series{{Labels: []Label{{"a", "1"}}}, {Labels: []Label{{"a", "1"}}}}
	for name, bad := range map[string]Family{
		"name":          {Name: "lapwing-b", Help: "x"},
		"digit first":   {Name: "1b", Help: "x"},
		"no help":       {Name: "lapwing_c"},
		"gauge total":   {Name: "lapwing_c_total", Help: "x"},
		"counter":       {Name: "lapwing_c", Help: "x", Counter: true},
		"label":         {Name: "lapwing_c", Help: "x", Series: []Series{{Labels: []Label{{"a:b", "1"}}}}},
		"label of its":  {Name: "lapwing_c", Help: "x", Series: []Series{{Labels: []Label{{"__a", "1"}}}}},
		"label twice":   {Name: "lapwing_c", Help: "x", Series: []Series{{Labels: []Label{{"a", "1"}, {"a", "2"}}}}},
		"series twice":  {Name: "lapwing_c", Help: "x", Series: twin},
		"family twice":  fine,
		"only unknowns": {Name: "lapwing_c", Help: "x", Series: []Series{{Value: math.NaN()}}},
	} {
		var b bytes.Buffer
		err := writeMetrics(&b, []Family{fine, bad, {Name: "lapwing_z", Help: "Z.", Series: []Series{{Value: 2}}}})
		if (err == nil) != (name == "only unknowns") {
			t.Errorf("%s: %v", name, err)
		}
		e, err := paneltest.Read(b.String())
		if err != nil || len(e.Families) != 2 || e.Series["lapwing_z{}"] != 2 {
			t.Errorf("%s: %v %v", name, err, e)
		}
	}
}

func TestMetricsOverHTTP(t *testing.T) {
	src := &still{metrics: []Family{{Name: "lapwing_samples_lost_total", Help: "Lost.", Counter: true, Series: []Series{{Labels: []Label{{"skid", "heron-meadow"}}, Value: 7}}}}}
	url := open(t, src)
	resp, err := http.Get(url + "metrics")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil || resp.StatusCode != 200 || resp.Header.Get("Content-Type") != metricsType {
		t.Fatal(err, resp.Status, resp.Header)
	}
	e, err := paneltest.Read(string(b))
	if err != nil {
		t.Fatalf("%v\n%s", err, b)
	}
	if e.Series[`lapwing_samples_lost_total{skid="heron-meadow"}`] != 7 {
		t.Errorf("what the source said is not there:\n%s", b)
	}
	// What the process says of itself must be true, not only well written.
	for name, least := range map[string]float64{"go_goroutines{}": 2, "go_memstats_alloc_bytes{}": 1e4, "process_cpu_seconds_total{}": 0.001, "process_resident_memory_bytes{}": 1e6,
		"process_open_fds{}": 3, "process_max_fds{}": 4, "process_start_time_seconds{}": 1.5e9} {
		if v, ok := e.Series[name]; ok != (!strings.HasPrefix(name, "process") || linux()) || ok && v < least {
			t.Errorf("%s is %v", name, v)
		}
	}
	req, _ := http.NewRequest(http.MethodPost, url+"metrics", nil)
	if resp, err := http.DefaultClient.Do(req); err != nil || resp.StatusCode != http.StatusMethodNotAllowed {
		t.Errorf("POST: %v %v", err, resp)
	} else {
		resp.Body.Close()
	}
}

func linux() bool { return len(ownProcess()) > 0 }
