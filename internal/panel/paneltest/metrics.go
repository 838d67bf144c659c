// Package paneltest reads what the page gives out, for tests of those who fill it.
package paneltest

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
)

// Metrics is one scrape.
type Metrics struct {
	Families map[string]string            // name: counter or gauge
	Series   map[string]float64           // name{a="1",b="2"}, labels as they were written; {} without any
	Labels   map[string]map[string]string // the same: by name of the label
}

var (
	helpLine   = regexp.MustCompile(`^# HELP ([a-zA-Z_:][a-zA-Z0-9_:]*) ((?:[^\\\n]|\\\\|\\n)+)$`)
	typeLine   = regexp.MustCompile(`^# TYPE ([a-zA-Z_:][a-zA-Z0-9_:]*) (counter|gauge)$`)
	sampleLine = regexp.MustCompile(`^([a-zA-Z_:][a-zA-Z0-9_:]*)(?:\{(.*)\})? ([^ ]+)$`)
	labelPart  = regexp.MustCompile(`^([a-zA-Z_][a-zA-Z0-9_]*)="((?:[^"\\\n]|\\\\|\\"|\\n)*)"(,|$)`)
	otherUnits = regexp.MustCompile(`_(milliseconds|ms|minutes|hours|days|kilobytes|megabytes|kb|mb|bits|percent|celsius_degrees|timestamp)(_|$)`)
)

// Read is a strict reader of the Prometheus text format 0.0.4 as its documentation states it ("Exposition formats": a line
// feed ends every line, HELP and TYPE come once and before the samples, a family's lines stand together, label values have
// \\, \" and \n escaped, no set of labels twice), and of the rules for names in "Metric and label naming" and
// "Instrumentation" (_total for counters alone, base units).
func Read(text string) (*Metrics, error) {
	e := &Metrics{Families: map[string]string{}, Series: map[string]float64{}, Labels: map[string]map[string]string{}}
	if text != "" && !strings.HasSuffix(text, "\n") {
		return nil, fmt.Errorf("no line feed at the end")
	}
	name, typed := "", false
	for i, line := range strings.Split(strings.TrimSuffix(text, "\n"), "\n") {
		if text == "" {
			break
		}
		bad := func(why string) error { return fmt.Errorf("line %d: %s: %q", i+1, why, line) }
		if m := helpLine.FindStringSubmatch(line); m != nil {
			if _, known := e.Families[m[1]]; known {
				return nil, bad("family twice, or its lines are not together")
			}
			name, typed = m[1], false
			e.Families[name] = ""
			continue
		}
		if m := typeLine.FindStringSubmatch(line); m != nil {
			if m[1] != name || typed {
				return nil, bad("TYPE does not follow its HELP")
			}
			if typed = true; (m[2] == "counter") != strings.HasSuffix(name, "_total") {
				return nil, bad("counters, and only they, end in _total")
			}
			if otherUnits.MatchString(name) && !strings.HasSuffix(name, "_timestamp_seconds") {
				return nil, bad("not a base unit")
			}
			e.Families[name] = m[2]
			continue
		}
		m := sampleLine.FindStringSubmatch(line)
		if m == nil || m[1] != name || !typed {
			return nil, bad("neither HELP, TYPE nor a sample of the family")
		}
		labels := map[string]string{}
		for rest := m[2]; rest != ""; {
			l := labelPart.FindStringSubmatch(rest)
			if l == nil || has(labels, l[1]) || strings.HasPrefix(l[1], "__") {
				return nil, bad("labels")
			}
			labels[l[1]] = strings.NewReplacer(`\\`, `\`, `\"`, `"`, `\n`, "\n").Replace(l[2])
			rest = rest[len(l[0]):]
		}
		v, err := strconv.ParseFloat(m[3], 64)
		if err != nil || m[3] != "+Inf" && m[3] != "-Inf" && strings.ContainsAny(m[3], "xXpPin_") {
			return nil, bad("value")
		}
		key := m[1] + "{" + m[2] + "}"
		if _, twice := e.Series[key]; twice {
			return nil, bad("series twice")
		}
		if e.Families[name] == "counter" && v < 0 {
			return nil, bad("a counter below zero")
		}
		e.Series[key], e.Labels[key] = v, labels
	}
	for f, typ := range e.Families {
		if typ == "" {
			return nil, fmt.Errorf("%s has no TYPE", f)
		}
	}
	return e, nil
}

func has(m map[string]string, k string) bool { _, ok := m[k]; return ok }

// Sum adds up the series of a family that carry all the labels given in pairs; n is how many there are.
func (m *Metrics) Sum(name string, pairs ...string) (sum float64, n int) {
	for key, v := range m.Series {
		if f, _, _ := strings.Cut(key, "{"); f != name {
			continue
		}
		fits := true
		for i := 0; i+1 < len(pairs); i += 2 {
			fits = fits && m.Labels[key][pairs[i]] == pairs[i+1]
		}
		if fits {
			sum += v
			n++
		}
	}
	return sum, n
}
