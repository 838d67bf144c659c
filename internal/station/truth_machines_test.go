package station

import (
	"os"
	"slices"
	"testing"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// The example machines at full rate, told of no passage: with none in the machine none is undone, steady or while ratio and
// speed move every six seconds or more; with passages at 25 to 70 times the shaft speed they are found within 2 %. A long run.
func TestPassagesOnEveryMachine(t *testing.T) {
	if os.Getenv("LAPWING_FIELD") == "" {
		t.Skip("long: set LAPWING_FIELD")
	}
	for _, name := range []string{"biomethane-two-throw.yaml", "hydrogen-makeup.yaml", "fast-small.yaml"} {
		raw, err := configs.Files.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		whole, err := skid.Parse(name, raw)
		if err != nil {
			t.Fatal(err)
		}
		sk := firstThrow(whole)
		stage := sk.Process.Stages[:1]
		for _, c := range []struct {
			name   string
			orders [2]float64
			swings bool
		}{{"none", [2]float64{}, false}, {"none, swings", [2]float64{}, true}, {"both ends", [2]float64{28, 45}, false}, {"both ends, swings", [2]float64{50, 70}, true}} {
			shaft := sk.Machine.RatedRPM / 60
			hz := [2]float64{c.orders[0] * shaft, c.orders[1] * shaft}
			told := piped(sk, [2]float64{}, [2]float64{})
			machine := piped(sk, hz, [2]float64{8, 12})
			s, seconds := model.Script{}, 200/shaft
			if c.swings {
				seconds = max(4*seconds, 60)
				s = truthWalk(sk, s, seconds, max(6, 60/shaft), 0)
			}
			l := through(t, machine, s, 11, seconds, func(info acq.Info) *Line {
				l, err := NewLine(told, info, nil, LearnPlan{}, nil, alarm.New(AlarmTiming(told)))
				if err != nil {
					t.Fatal(err)
				}
				l.records, l.gauges.every, l.gauges.apart = Heads, 1, gaugeSpacing
				return l
			}, func(*Line, *Output) {})
			found := l.gauges.inForce()
			t.Logf("%s, %s (%.0f and %.0f Hz, ratio %.2f): %+v", name, c.name, hz[0], hz[1], stage[0].Pd/stage[0].Ps, found)
			for e := range hz {
				i := slices.IndexFunc(found, func(p duty.Passage) bool { return p.Channel == sk.Throws[0].Ends[e].Pressure })
				if (i >= 0) != (hz[e] > 0) || i >= 0 && (found[i].Hz < .97*hz[e] || found[i].Hz > 1.03*hz[e]) {
					t.Errorf("%s, %s: end %d has %.0f Hz", name, c.name, e, hz[e])
				}
			}
		}
	}
}
