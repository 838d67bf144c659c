package skid

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"regexp"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// maxFile bounds a skid file: the longest sensible one is a tenth of it.
const maxFile = 256 << 10

// mostProblems bounds the answer to a file that is no skid file at all.
const mostProblems = 200

// reader walks a YAML tree by hand, so that every message knows its place, and collects problems instead of
// stopping at the first.
type reader struct {
	file      string
	problems  []Problem
	more      int // problems in all, those beyond mostProblems included
	at        map[string]Place
	defaulted []string
}

func (r *reader) problem(at Place, path, fix, format string, args ...any) {
	if r.more++; r.more > mostProblems {
		return
	}
	r.problems = append(r.problems, Problem{r.file, at, path, fmt.Sprintf(format, args...), fix})
}

func place(n *yaml.Node) Place { return Place{n.Line, n.Column} }

var yamlLine = regexp.MustCompile(`line (\d+)`)

// root parses the one document of a file and refuses what a skid file has no use for. nil: a problem was noted.
func (r *reader) root(raw []byte) *yaml.Node {
	if len(raw) > maxFile {
		r.problem(Place{1, 1}, "", "is this the right file?", "%d bytes is too long for a skid file (at most %d)", len(raw), maxFile)
		return nil
	}
	if i := bytes.IndexByte(raw, '\t'); i >= 0 && onlyBlank(raw[:i]) {
		at := Place{1 + bytes.Count(raw[:i], []byte{'\n'}), i - bytes.LastIndexByte(raw[:i], '\n')}
		r.problem(at, "", "indent with spaces", "a tab in the indentation")
		return nil
	}
	dec := yaml.NewDecoder(bytes.NewReader(raw))
	var doc, second yaml.Node
	if err := dec.Decode(&doc); err != nil {
		if errors.Is(err, io.EOF) {
			r.problem(Place{1, 1}, "", "begin with `lapwing: 1`; configs/ holds examples", "the file is empty")
			return nil
		}
		r.syntax(err)
		return nil
	}
	if err := dec.Decode(&second); err == nil {
		r.problem(place(&second), "", "keep one machine per file: delete everything from the second `---` on", "a second document begins here")
	} else if !errors.Is(err, io.EOF) {
		r.syntax(err)
	}
	if doc.Kind != yaml.DocumentNode || len(doc.Content) != 1 {
		r.problem(Place{1, 1}, "", "begin with `lapwing: 1`; configs/ holds examples", "the file holds no settings")
		return nil
	}
	before := len(r.problems)
	r.plain(doc.Content[0], 0)
	if len(r.problems) > before {
		return nil
	}
	return doc.Content[0]
}

// onlyBlank reports whether the last line of b holds nothing but spaces.
func onlyBlank(b []byte) bool {
	return len(bytes.Trim(b[bytes.LastIndexByte(b, '\n')+1:], " ")) == 0
}

func (r *reader) syntax(err error) {
	at := Place{1, 1}
	msg := strings.TrimPrefix(err.Error(), "yaml: ")
	if m := yamlLine.FindStringSubmatch(msg); m != nil {
		at.Line, _ = strconv.Atoi(m[1])
		msg = strings.TrimPrefix(msg, m[0]+": ")
	}
	r.problem(at, "", "look at this line and the one above: indentation, a missing colon, an open quote or bracket", "this is not YAML: %s", msg)
}

// plain refuses anchors, aliases, merge keys and explicit tags anywhere: a value must stand where it is used.
func (r *reader) plain(n *yaml.Node, depth int) {
	const deepest = 32 // a skid file needs 7
	switch {
	case depth > deepest:
		r.problem(place(n), "", "a skid file nests seven levels at most", "nested too deep")
		return
	case n.Kind == yaml.AliasNode:
		r.problem(place(n), "", "write the value out here", "alias *%s: anchors and aliases are not used in a skid file", clip(n.Value))
		return
	case n.Anchor != "":
		r.problem(place(n), "", "delete &"+clip(n.Anchor), "anchor &%s: anchors and aliases are not used in a skid file", clip(n.Anchor))
	case n.Style&yaml.TaggedStyle != 0:
		r.problem(place(n), "", "delete it", "tag %s: tags are not used in a skid file", clip(n.Tag))
	}
	for _, c := range n.Content {
		r.plain(c, depth+1)
	}
}

// clip keeps foreign text in a message short.
func clip(s string) string {
	if r := []rune(s); len(r) > 40 {
		return string(r[:40]) + "…"
	}
	return s
}
