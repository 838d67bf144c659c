package panel

import (
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/wire"
)

//go:embed page.html
var pageHTML string

// styleHash lets the one style block through the content security policy.
var styleHash = func() string {
	_, rest, _ := strings.Cut(pageHTML, "<style>")
	css, _, _ := strings.Cut(rest, "</style>")
	sum := sha256.Sum256([]byte(css))
	return base64.StdEncoding.EncodeToString(sum[:])
}()

var page = template.Must(template.New("page").Funcs(template.FuncMap{
	"clock":     clock,
	"num":       num,
	"mib":       func(b int64) string { return fmt.Sprintf("%.1f MiB", float64(b)/(1<<20)) },
	"val":       val,
	"tone":      tone,
	"condition": condition,
	"mark":      mark,
	"words":     inWords,
	"unit":      unit,
	"amount":    amount,
	"join":      func(s []string) string { return strings.Join(s, ", ") },
}).Parse(pageHTML))

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
	return fmt.Sprintf("%.1f", *p)
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
		return strconv.FormatFloat(x, 'g', 3, 64)
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
