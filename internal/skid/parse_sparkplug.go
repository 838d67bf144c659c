package skid

import (
	"regexp"
)

// The dialects in which the uplink can speak.
const (
	DialectJSON      = "json"
	DialectSparkplug = "sparkplug"
)

const defaultGroup = "lapwing"

// sparkplugID is one level of a topic; its characters are those that no host stumbles over.
var sparkplugID = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_. -]{0,62}$`)

// Sparkplug names the machine in Sparkplug B: an edge node of a group; its throws are the devices.
type Sparkplug struct {
	Group       string
	Node        string // the skid's id, unless the file names another
	PrimaryHost string // empty: nobody is waited for
}

func (r *reader) dialect(s *object, sk *Skid) {
	u := &sk.Uplink
	u.Dialect = s.choice("dialect", DialectJSON, DialectJSON, DialectSparkplug)
	if u.Dialect != DialectSparkplug {
		if s.has("sparkplug") {
			s.wrong("sparkplug", "write dialect: sparkplug too, or take this out", "names for a dialect that is not spoken")
		}
		return
	}
	u.Sparkplug = Sparkplug{Group: defaultGroup, Node: sk.ID}
	o := s.sub("sparkplug", false, "group", "node", "primary_host")
	const rule = "a name of letters, digits, spaces, '_', '-' and '.'"
	for _, f := range []struct {
		key string
		to  *string
	}{{"group", &u.Sparkplug.Group}, {"node", &u.Sparkplug.Node}, {"primary_host", &u.Sparkplug.PrimaryHost}} {
		if o != nil && o.has(f.key) {
			if v, ok := o.text(f.key, sparkplugID, rule, false); ok {
				*f.to = v
			}
		} else if *f.to != "" {
			r.defaulted = append(r.defaulted, "uplink.sparkplug."+f.key+" = "+*f.to)
		}
	}
	if u.Sparkplug.Group == "STATE" {
		o.wrong("group", "write another name", "STATE is the name of another topic of Sparkplug")
	}
}
