package skid

import (
	"strings"
	"testing"
)

func TestSparkplugNames(t *testing.T) {
	for name, c := range map[string]struct {
		lines string
		want  Sparkplug
		says  string
	}{
		"json unless the file says otherwise": {"", Sparkplug{}, ""},
		"json in so many words":               {"\n  dialect: json", Sparkplug{}, ""},
		"names by default":                    {"\n  dialect: sparkplug", Sparkplug{Group: "lapwing", Node: "quillmere-c1"}, "edge node quillmere-c1 of group lapwing"},
		"names of the file": {"\n  dialect: sparkplug\n  sparkplug: {group: Gas plant, node: C 1, primary_host: room-2}", Sparkplug{Group: "Gas plant", Node: "C 1", PrimaryHost: "room-2"},
			"says nothing while the primary host room-2 is away"},
	} {
		t.Run(name, func(t *testing.T) {
			file, _ := swap(t, example(t), "  root: lapwing", "  root: lapwing"+c.lines)
			sk := parsed(t, file)
			if sk.Uplink.Sparkplug != c.want || (sk.Uplink.Dialect == DialectSparkplug) != (c.want != Sparkplug{}) {
				t.Errorf("dialect %s, %+v", sk.Uplink.Dialect, sk.Uplink.Sparkplug)
			}
			var b strings.Builder
			if err := Report(&b, sk, sk.Rate); err != nil {
				t.Fatal(err)
			}
			if strings.Contains(b.String(), "Sparkplug") != (c.says != "") || !strings.Contains(b.String(), c.says) {
				t.Errorf("the report says\n%s", b.String())
			}
		})
	}
}
