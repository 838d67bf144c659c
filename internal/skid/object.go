package skid

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// object is one mapping being read.
type object struct {
	r      *reader
	path   string
	at     Place
	known  []string
	fields map[string]*yaml.Node
	keys   map[string]Place
	meant  map[string]bool // keys that an unknown one was probably meant to be: not reported missing as well
}

// object opens a mapping with a fixed set of keys; unknown and double keys are noted. A node that is no mapping is
// noted and gives nil, on which every method below answers "absent" without a second complaint.
func (r *reader) object(n *yaml.Node, path string, known ...string) *object {
	if n.Kind != yaml.MappingNode {
		r.problem(place(n), path, "write keys below it: "+strings.Join(known, ", "), "%s where settings belong", what(n))
		return nil
	}
	o := &object{r: r, path: path, at: place(n), known: known, fields: map[string]*yaml.Node{}, keys: map[string]Place{}, meant: map[string]bool{}}
	r.at[path] = o.at
	for i := 0; i+1 < len(n.Content); i += 2 {
		k, v := n.Content[i], n.Content[i+1]
		switch {
		case k.Kind != yaml.ScalarNode:
			r.problem(place(k), path, "write one word as a key", "%s cannot be a key", what(k))
		case !o.knows(k.Value):
			fix, meant := advise(k.Value, v.Value, known)
			r.problem(place(k), join2(path, clip(k.Value)), fix, "unknown key")
			for _, m := range meant {
				o.meant[m] = true
			}
		case o.fields[k.Value] != nil:
			first := o.keys[k.Value]
			r.problem(place(k), join2(path, k.Value), fmt.Sprintf("keep one; the first is on line %d", first.Line), "given twice")
		default:
			o.fields[k.Value], o.keys[k.Value] = v, place(k)
			r.at[join2(path, k.Value)] = place(v)
		}
	}
	return o
}

func (o *object) knows(key string) bool {
	for _, k := range o.known {
		if k == key {
			return true
		}
	}
	return false
}

func join2(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// what names the kind of a node for a message.
func what(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "a block of settings"
	case yaml.SequenceNode:
		return "a list"
	case yaml.ScalarNode:
		switch n.Tag {
		case "!!null":
			return "nothing"
		case "!!int", "!!float":
			return "the number " + clip(n.Value)
		case "!!bool":
			return "the word " + clip(n.Value)
		}
		return fmt.Sprintf("the text %q", clip(n.Value))
	}
	return "something else"
}

// wrong notes a problem with the value of a key.
func (o *object) wrong(key, fix, format string, args ...any) {
	at := o.at
	if n := o.fields[key]; n != nil {
		at = place(n)
	}
	o.r.problem(at, join2(o.path, key), fix, format, args...)
}

// has reports whether a key was given.
func (o *object) has(key string) bool { return o != nil && o.fields[key] != nil }

// node gives a key's value; a missing needed one is noted with the advice to give it.
func (o *object) node(key string, needed bool, fix string) *yaml.Node {
	if o == nil {
		return nil
	}
	n := o.fields[key]
	if n == nil {
		if needed && !o.meant[key] {
			o.wrong(key, fix, "missing")
		}
		return nil
	}
	if n.Kind == yaml.ScalarNode && n.Tag == "!!null" {
		o.wrong(key, "write one or delete the line", "has no value")
		return nil
	}
	return n
}

// bounds are what a number may be, in the unit of its key.
type bounds struct{ lo, hi float64 }

// num reads a number within bounds. Absent or refused gives NaN; absent is a problem only when needed.
func (o *object) num(key string, b bounds, needed bool) float64 {
	_, u := split(key)
	n := o.node(key, needed, strings.TrimSpace(fmt.Sprintf("write `%s: …`, a number from %s to %s %s", key, short(b.lo), short(b.hi), u.name)))
	if n == nil {
		return math.NaN()
	}
	v, ok := o.r.number(n, join2(o.path, key), u)
	if !ok {
		return math.NaN()
	}
	if v < b.lo || v > b.hi {
		o.wrong(key, slip(key, v, b), "%s is outside %s to %s", strings.TrimSpace(short(v)+" "+u.name), short(b.lo), strings.TrimSpace(short(b.hi)+" "+u.name))
		return math.NaN()
	}
	return v
}

// slip guesses the unit in which a number out of bounds was meant.
func slip(key string, v float64, b bounds) string {
	_, u := split(key)
	var guess []string
	for _, w := range units {
		if !w.slip || w.suffix == u.suffix {
			continue
		}
		if !sameDim(w, u) && !(w.dim == "pressure?" && u.dim == "pressure") {
			continue
		}
		if c := u.from(w.base(v)); c >= b.lo && c <= b.hi {
			guess = append(guess, fmt.Sprintf("if it is meant in %s write %s: %s", w.name, key, short(c)))
		}
	}
	if len(guess) == 0 {
		return "check the number and its unit"
	}
	return strings.Join(guess, ", ")
}

// number reads one scalar as a finite number.
func (r *reader) number(n *yaml.Node, path string, u unit) (float64, bool) {
	if n.Kind == yaml.ScalarNode && (n.Tag == "!!int" || n.Tag == "!!float") {
		var v float64
		if n.Decode(&v) == nil && !math.IsNaN(v) && !math.IsInf(v, 0) {
			return v, true
		}
		r.problem(place(n), path, "write a finite number", "%s is not a number that can be used", clip(n.Value))
		return 0, false
	}
	fix := "write a number"
	if n.Kind == yaml.ScalarNode {
		s := strings.TrimSpace(n.Value)
		f := strings.Fields(s)
		_, plain := strconv.ParseFloat(s, 64)
		_, comma := strconv.ParseFloat(strings.Replace(s, ",", ".", 1), 64)
		switch {
		case plain == nil:
			fix = "write it without quotes: " + s
		case comma == nil && strings.Contains(s, ","):
			fix = "use a decimal point: " + strings.Replace(s, ",", ".", 1)
		case len(f) == 2 && u.name != "":
			if _, err := strconv.ParseFloat(f[0], 64); err == nil {
				fix = fmt.Sprintf("write the number alone; the key says the unit (%s)", u.name)
			}
		}
	}
	r.problem(place(n), path, fix, "%s where a number belongs", what(n))
	return 0, false
}

// numOr is num with a default for an absent key, which the check then shows.
func (o *object) numOr(key string, b bounds, def float64) float64 {
	if o == nil {
		return def
	}
	if !o.has(key) {
		o.r.defaulted = append(o.r.defaulted, join2(o.path, key)+" = "+short(def))
		return def
	}
	return o.num(key, b, false)
}

// whole reads a whole number. ok is false when it is absent or refused.
func (o *object) whole(key string, lo, hi int, needed bool) (int, bool) {
	v := o.num(key, bounds{float64(lo), float64(hi)}, needed)
	if math.IsNaN(v) {
		return 0, false
	}
	if v != math.Trunc(v) {
		o.wrong(key, "write a whole number", "%s is not whole", short(v))
		return 0, false
	}
	return int(v), true
}

// text reads a string of at most 120 printable characters that fits the pattern; ok is false when absent or refused.
func (o *object) text(key string, pattern *regexp.Regexp, rule string, needed bool) (string, bool) {
	n := o.node(key, needed, "write `"+key+": …`, "+rule)
	if n == nil {
		return "", false
	}
	return o.r.word(n, join2(o.path, key), pattern, rule)
}

func (r *reader) word(n *yaml.Node, path string, pattern *regexp.Regexp, rule string) (string, bool) {
	if n.Kind == yaml.ScalarNode && (n.Tag == "!!int" || n.Tag == "!!float" || n.Tag == "!!bool" || n.Tag == "!!timestamp") {
		r.problem(place(n), path, fmt.Sprintf("put it in quotes if it is a name: %q", clip(n.Value)), "%s where text belongs", what(n))
		return "", false
	}
	if n.Kind != yaml.ScalarNode || n.Tag != "!!str" {
		r.problem(place(n), path, "write "+rule, "%s where text belongs", what(n))
		return "", false
	}
	if len(n.Value) == 0 || len(n.Value) > 120 || strings.IndexFunc(n.Value, func(c rune) bool { return c < ' ' || c == 0x7f }) >= 0 {
		r.problem(place(n), path, "write "+rule, "%q is empty, longer than 120 bytes, or holds control characters", clip(n.Value))
		return "", false
	}
	if pattern != nil && !pattern.MatchString(n.Value) {
		r.problem(place(n), path, "write "+rule, "%q cannot be used", clip(n.Value))
		return "", false
	}
	return n.Value, true
}

// choice reads one word of a few; def answers an absent key.
func (o *object) choice(key, def string, of ...string) string {
	n := o.node(key, false, "")
	if n == nil {
		return def
	}
	for _, w := range of {
		if n.Kind == yaml.ScalarNode && n.Value == w {
			return w
		}
	}
	o.wrong(key, "write one of: "+strings.Join(of, ", "), "%s cannot be used", what(n))
	return def
}

// list gives the items of a sequence; absent or refused gives none.
func (o *object) list(key string, lo, hi int, needed bool, fix string) []*yaml.Node {
	n := o.node(key, needed, fix)
	if n == nil {
		return nil
	}
	if n.Kind != yaml.SequenceNode {
		o.wrong(key, fix, "%s where a list belongs", what(n))
		return nil
	}
	if len(n.Content) < lo || len(n.Content) > hi {
		o.wrong(key, fix, "%d items; %d to %d are possible", len(n.Content), lo, hi)
		return nil
	}
	return n.Content
}

// sub opens a mapping below this one; absent or refused gives nil.
func (o *object) sub(key string, needed bool, known ...string) *object {
	n := o.node(key, needed, "write `"+key+":` with "+strings.Join(known, ", ")+" below it")
	if n == nil {
		return nil
	}
	return o.r.object(n, join2(o.path, key), known...)
}

// section opens a mapping that may be left out: an absent one is empty, so that every default in it shows.
func (o *object) section(key string, known ...string) *object {
	if o.has(key) {
		return o.sub(key, false, known...)
	}
	return &object{r: o.r, path: join2(o.path, key), at: o.at, known: known}
}

// entries gives a mapping with free keys (gas components, ends of a load step) in the order of the file; double
// keys are noted.
func (o *object) entries(key string, needed bool, fix string) (keys, values []*yaml.Node) {
	n := o.node(key, needed, fix)
	if n == nil {
		return nil, nil
	}
	if n.Kind != yaml.MappingNode {
		o.wrong(key, fix, "%s where `name: number` lines belong", what(n))
		return nil, nil
	}
	seen := map[string]bool{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		k, v := n.Content[i], n.Content[i+1]
		path := join2(join2(o.path, key), clip(k.Value))
		switch {
		case k.Kind != yaml.ScalarNode:
			o.r.problem(place(k), join2(o.path, key), fix, "%s cannot be a key", what(k))
		case seen[k.Value]:
			o.r.problem(place(k), path, "keep one", "given twice")
		default:
			seen[k.Value] = true
			o.r.at[path] = place(v)
			keys, values = append(keys, k), append(values, v)
		}
	}
	return keys, values
}
