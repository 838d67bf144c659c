package panel

import (
	"embed"
	"fmt"
	"html/template"
	"math"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/wire"
)

//go:embed pages
var files embed.FS

// pages are the templates by name; each has its own main in the common layout.
var pages = func() map[string]*template.Template {
	base := template.Must(template.New("layout").Funcs(template.FuncMap{
		"clock":     clock,
		"iso":       func(t time.Time) string { return t.UTC().Format(time.RFC3339Nano) },
		"num":       num,
		"fig":       fig,
		"mib":       func(b int64) string { return fmt.Sprintf("%.1f MiB", float64(b)/(1<<20)) },
		"val":       val,
		"tone":      tone,
		"condition": condition,
		"mark":      mark,
		"words":     inWords,
		"unit":      unit,
		"amount":    amount,
		"join":      func(s []string) string { return strings.Join(s, ", ") },
		"semi":      func(s []string) string { return strings.Join(s, "; ") },
		"weight":    weight,
		"span":      span,
		"lasted":    lasted,
		"keepable":  func(c wire.Clip) bool { return c.Complete && !c.From.IsZero() && c.To.After(c.From) },
		"dict": func(_ string, a act, _ string, key string) map[string]any {
			return map[string]any{"Act": a, "Key": key}
		},
	}).ParseFS(files, "pages/layout.html"))
	out := map[string]*template.Template{}
	for _, name := range []string{"machine", "cylinder", "findings", "journal", "tape", "channels", "channel"} {
		out[name] = template.Must(template.Must(base.Clone()).ParseFS(files, "pages/"+name+".html"))
	}
	return out
}()

// fig writes a value in four figures.
func fig(p *float64) string {
	if p == nil {
		return "–"
	}
	return minus(strconv.FormatFloat(*p, 'g', 4, 64))
}

// span is a window.
func span(w *[2]float64) string {
	if w == nil {
		return "–"
	}
	return num(&w[0]) + " to " + num(&w[1])
}

// minus gives a figure a true minus sign.
func minus(s string) string {
	if strings.HasPrefix(s, "-") {
		return "−" + s[1:]
	}
	return s
}

// beside writes a value with as many decimals as its spread is worth, two figures of it.
func beside(v, spread float64) string {
	decimals := max(0, 1-int(math.Floor(math.Log10(spread))))
	if !(spread > 0) || decimals > 6 {
		return fig(&v)
	}
	k := math.Pow(10, float64(decimals))
	return minus(strconv.FormatFloat(math.Round(v*k)/k+0, 'f', decimals, 64))
}

// weight is what a class of evidence weighs in a hypothesis.
func weight(c wire.WhyCase, class string) string {
	for _, k := range c.Classes {
		if k.Class == class {
			return num(k.Median)
		}
	}
	return "–"
}

func clock(t time.Time) string {
	if t.IsZero() {
		return "–"
	}
	return t.UTC().Format("2006-01-02 15:04:05Z")
}

func num(p *float64) string {
	if p == nil {
		return "–"
	}
	return minus(fmt.Sprintf("%.1f", math.Round(*p*10)/10+0)) // + 0: no minus zero
}

func val(m map[string]float64, name, format string) string {
	if x, ok := m[name]; ok {
		return fmt.Sprintf(format, x)
	}
	return "–"
}

// tone is the colour class of a severity or grade.
func tone(severity string) string {
	if ranks[severity] > 0 {
		return severity
	}
	return "mute"
}

// condition is the colour class of a channel's state.
func condition(state string) string {
	switch state {
	case "failure":
		return "alert"
	case "out of specification", "maintenance required":
		return "advisory"
	case "good":
		return "good"
	}
	return "mute"
}

// mark gives each class a shape of its own: colour alone is not enough.
func mark(class string) string {
	switch class {
	case "danger":
		return "◆"
	case "alert":
		return "▲"
	case "advisory":
		return "●"
	case "good":
		return "✓"
	}
	return "○"
}

var units = []struct{ suffix, sign string }{{"_mm2", "mm²"}, {"_percent", "%"}, {"_db", "dB"}, {"_deg", "°"}, {"_bar", "bar"}, {"_kn", "kN"}, {"_kw", "kW"}, {"_kg_h", "kg/h"}, {"_k", "K"}, {"_ms", "ms"}}

// unit gives an amount's name without its unit, in words.
func unit(name string) string {
	for _, u := range units {
		if s, ok := strings.CutSuffix(name, u.suffix); ok {
			return strings.ReplaceAll(s, "_", " ")
		}
	}
	return strings.ReplaceAll(name, "_", " ")
}

func amount(a wire.Amount) string {
	show := func(x float64) string {
		if x >= 1000 || x <= -1000 {
			return strconv.FormatFloat(x, 'f', 0, 64)
		}
		if x < 5e-3 && x > -5e-3 {
			return "0"
		}
		return minus(strconv.FormatFloat(x, 'g', 3, 64))
	}
	sign := ""
	for _, u := range units {
		if strings.HasSuffix(a.Name, u.suffix) {
			sign = " " + u.sign
			break
		}
	}
	s := show(a.Value) + sign
	if a.Low != nil && a.High != nil {
		s += " (" + show(*a.Low) + " to " + show(*a.High) + ")"
	}
	return s
}
