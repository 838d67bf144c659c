package panel

import (
	"bytes"
	"errors"
	"fmt"
	"log/slog"
	"math"
	"net/http"
	"slices"
	"strconv"
	"strings"
	"sync"
)

// Family is one metric with all its series, as Prometheus calls them. Names follow that ecosystem: base units in the name,
// a counter ends in _total, a time is a Unix time stamp and never an age.
type Family struct {
	Name, Help string
	Counter    bool // only ever rises while the process lives; otherwise a gauge
	Series     []Series
}

// Series is one value with its labels. A value that is not known is no series: NaN is left out.
type Series struct {
	Labels []Label
	Value  float64
}

// Label is one name and value; a value may be any text.
type Label struct{ Name, Value string }

// metricsType is the text format of the exposition, version 0.0.4: every Prometheus-compatible scraper reads it.
const metricsType = "text/plain; version=0.0.4; charset=utf-8"

// scrape answers one request for metrics. One is made at a time: many scrapers at once must not add up.
func scrape(src Source, log *slog.Logger) http.HandlerFunc {
	var one sync.Mutex
	return func(w http.ResponseWriter, r *http.Request) {
		one.Lock()
		var b bytes.Buffer
		err := writeMetrics(&b, append(src.Metrics(), processMetrics()...))
		one.Unlock()
		if err != nil { // a fault of ours; what could be said is said all the same
			log.Error("panel: metrics", "err", err)
		}
		w.Header().Set("Content-Type", metricsType)
		_, _ = w.Write(b.Bytes())
	}
}

// writeMetrics writes families that are in order, and says which were not: one refused family costs no other.
func writeMetrics(b *bytes.Buffer, fs []Family) error {
	var errs []error
	seen := map[string]bool{}
	for i := range fs {
		f := &fs[i]
		if err := f.check(); err != nil {
			errs = append(errs, err)
			continue
		}
		if seen[f.Name] {
			errs = append(errs, fmt.Errorf("panel: metric %s twice", f.Name))
			continue
		}
		seen[f.Name] = true
		f.write(b)
	}
	return errors.Join(errs...)
}

func (f *Family) write(b *bytes.Buffer) {
	if !slices.ContainsFunc(f.Series, func(s Series) bool { return !math.IsNaN(s.Value) }) {
		return
	}
	kind := "gauge"
	if f.Counter {
		kind = "counter"
	}
	fmt.Fprintf(b, "# HELP %s %s\n# TYPE %s %s\n", f.Name, helpText.Replace(f.Help), f.Name, kind)
	for _, s := range f.Series {
		if math.IsNaN(s.Value) {
			continue
		}
		b.WriteString(f.Name)
		for i, l := range s.Labels {
			b.WriteByte("{,"[min(i, 1)])
			b.WriteString(l.Name)
			b.WriteString(`="`)
			b.WriteString(labelText.Replace(strings.ToValidUTF8(l.Value, "\uFFFD")))
			b.WriteByte('"')
		}
		if len(s.Labels) > 0 {
			b.WriteByte('}')
		}
		b.WriteByte(' ')
		b.WriteString(number(s.Value))
		b.WriteByte('\n')
	}
}

var (
	helpText  = strings.NewReplacer(`\`, `\\`, "\n", `\n`)
	labelText = strings.NewReplacer(`\`, `\\`, "\n", `\n`, `"`, `\"`)
)

func number(v float64) string {
	switch {
	case math.IsInf(v, 1):
		return "+Inf"
	case math.IsInf(v, -1):
		return "-Inf"
	}
	return strconv.FormatFloat(v, 'g', -1, 64)
}

// check refuses what a scraper would refuse with the whole answer: bad names, and two series with the same labels.
func (f *Family) check() error {
	if !metricName(f.Name) || f.Help == "" || f.Counter != strings.HasSuffix(f.Name, "_total") {
		return fmt.Errorf("panel: metric %q: name, help or kind is not in order", f.Name)
	}
	seen := make(map[string]bool, len(f.Series))
	for _, s := range f.Series {
		var key strings.Builder
		for i, l := range s.Labels {
			if !labelName(l.Name) || slices.ContainsFunc(s.Labels[:i], func(o Label) bool { return o.Name == l.Name }) {
				return fmt.Errorf("panel: metric %s: label %q is not in order", f.Name, l.Name)
			}
			key.WriteString(strconv.Quote(l.Value))
		}
		if seen[key.String()] {
			return fmt.Errorf("panel: metric %s: two series with labels %v", f.Name, s.Labels)
		}
		seen[key.String()] = true
	}
	return nil
}

func metricName(s string) bool { return nameOf(s, ":") }

func labelName(s string) bool { return nameOf(s, "") && !strings.HasPrefix(s, "__") }

func nameOf(s, also string) bool {
	for i, c := range s {
		if !(c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c == '_' || c >= '0' && c <= '9' && i > 0 || strings.ContainsRune(also, c)) {
			return false
		}
	}
	return s != ""
}
