package station

import (
	"math"
	"os"
	"strings"
	"testing"

	"lapwing/internal/alarm"
	"lapwing/internal/model"
)

// Marks that come late or early after the baseline was learnt are said of the phase reference, with the angle that the
// fit finds, and as the throw's dead centre by the judge; no valve is named. One case always, the table in the long runs.
func TestPhaseSlipIsThePhaseReferences(t *testing.T) {
	t.Parallel()
	r := theTruthRig(t)
	list := []float64{.5}
	if os.Getenv("LAPWING_FIELD") != "" {
		list = []float64{-1.5, -.5, -.2, .2, .5, 1.5}
	}
	for _, v := range list {
		worst, l := r.hears(t, model.Script{}.Add(3, 1, model.PhaseSlip, "", v), 21, 1, nil)
		deg, doubt := l.slip.Late()
		c := channelNamed(t, l.Channels(), "phase")
		t.Logf("%+.2f°: %+.3f° found, said is %v; %s %s", v, deg, worst, c.State, c.Reason)
		for key := range worst {
			if key != "t1/dead-centre" && key != "phase/"+sensorKind {
				t.Errorf("%+.2f°: %s is accused", v, key)
			}
		}
		if math.Abs(deg-v) > .05 || doubt != (math.Abs(v) > .3) || doubt && (worst["phase/"+sensorKind] != alarm.Advisory ||
			!strings.Contains(c.Reason, map[bool]string{true: "early", false: "late"}[v < 0])) {
			t.Errorf("%+.2f°: %.3f° found, doubted %v, %+v", v, deg, doubt, c)
		}
	}
}
