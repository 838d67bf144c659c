package verdict

import (
	"strings"
	"testing"
)

// Nobody is told of less than no leak.
func TestNoLeakBelowNone(t *testing.T) {
	said := sizedWords([]Quantity{{Name: "leak_area_mm2", Value: -.02, Lo: -1.3, Hi: .6}, {Name: "leak_percent", Value: -.01, Lo: -.4, Hi: .2}})
	if !strings.Contains(said, "leak area 0.0 mm² (0.0 to 0.6), 0.0 % of its throughput (0.0 to 0.2)") || strings.Contains(said, "-") {
		t.Errorf("%q", said)
	}
}
