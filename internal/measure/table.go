package measure

import (
	"fmt"
	"strings"
)

// Table is the list of all measures in Markdown, as it stands in DEVELOPERS.md: made of the definitions that the layout
// is made of.
func Table() string {
	var b strings.Builder
	for _, g := range groups() {
		fmt.Fprintf(&b, "**%s** (%s): %s.\n\n", g.title, g.subject, g.rule)
		b.WriteString("| measure | unit | class | what it is | source | there when | uncertain by |\n| --- | --- | --- | --- | --- | --- | --- |\n")
		for _, d := range g.defs {
			class := d.class.String()
			if d.eye {
				class += ", shown only"
			}
			fmt.Fprintf(&b, "| `%s` | %s | %s | %s | %s | %s | %s |\n", d.name, d.unit, class, d.text(), d.source, d.valid, d.unc)
		}
		b.WriteString("\n")
	}
	return b.String()
}

// comment is the same list as part of the package comment in doc.go.
func comment() string {
	var b strings.Builder
	for _, g := range groups() {
		fmt.Fprintf(&b, "// # Features: %s\n//\n// Subject %s: %s.\n//\n", strings.ToLower(g.title), strings.ReplaceAll(g.subject, "`", ""), g.rule)
		for _, d := range g.defs {
			fmt.Fprintf(&b, "//\t%s [%s, %s] %s\n", d.name, d.unit, d.class, d.text())
			fmt.Fprintf(&b, "//\t\tsource: %s. there when: %s. uncertain by: %s\n", d.source, d.valid, d.unc)
		}
		b.WriteString("//\n")
	}
	return b.String()
}

func (d *def) text() string {
	if d.how == "" {
		return d.what
	}
	return d.what + ": " + d.how
}
