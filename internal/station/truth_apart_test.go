package station

import (
	"context"
	"math"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// The same shaft through one mark with its ripple stated, and through a ring gear of 90 teeth beside a sensor with one mark
// a turn and no word of the ripple, gives the same dead centres; nothing is said of either channel.
func TestLineWithAMarkApart(t *testing.T) {
	parse := func(cuts ...[2]string) *skid.Skid { return exampleWith(t, cuts...) }
	one := parse()
	gear := parse([2]string{"  channel: phase\n", "  channel: phase\n  teeth: 90\n  index_channel: once\n"},
		[2]string{"  - {id: phase, input: 0,", "  - {id: once, input: 7, kind: phase, range_v: 10}\n  - {id: phase, input: 0,"})
	if w := gear.Phase.Wheel; !w.Separate || w.Teeth != 90 || gear.Phase.Index != "once" || gear.Phase.MarksPerTurn != 90 {
		t.Fatalf("%+v", gear.Phase)
	}
	seen := func(sk *skid.Skid) (at []float64, l *Line) {
		src, err := acqmodel.Open(sk, model.Script{RPM: 740}, acqmodel.Options{Seed: 5, Duration: 2 * time.Second})
		if err != nil {
			t.Fatal(err)
		}
		defer src.Close()
		told := *sk
		if sk == gear {
			told.Phase.Ripple, told.Phase.Uncertainty = nil, 0
		}
		if l, err = NewLine(&told, src.Info(), fixed(sk), LearnPlan{}, nil, alarm.New(AlarmTiming(&told))); err != nil {
			t.Fatal(err)
		}
		var b acq.Block
		for src.Read(context.Background(), &b) == nil {
			if err := l.Add(&b, func(o *Output) {
				if o.Record.Valid {
					at = append(at, *o.Record.Throws[0].TimeS)
				}
			}); err != nil {
				t.Fatal(err)
			}
		}
		return at, l
	}
	want, _ := seen(one)
	got, l := seen(gear)
	if len(want) < 15 || len(got) < len(want)-2 {
		t.Fatalf("%d turns with a gear, %d with one mark", len(got), len(want))
	}
	worst, n := 0.0, 0
	for _, x := range got {
		for _, y := range want {
			if math.Abs(x-y) < .01 {
				worst, n = math.Max(worst, math.Abs(x-y)*740*6), n+1
			}
		}
	}
	t.Logf("%d dead centres, apart by up to %.3f°", n, worst)
	if n < len(want)-3 || worst > .1 {
		t.Errorf("%d of %d dead centres, up to %.3f° apart", n, len(want), worst)
	}
	for _, id := range []string{"phase", "once"} {
		if c := channelNamed(t, l.Channels(), id); c.State != "good" {
			t.Errorf("%+v", c)
		}
	}
	for want, edit := range map[string][2]string{
		"teeth and mark are on one channel": {"  channel: phase\n", "  channel: phase\n  teeth: 90\n  index_channel: phase\n"},
		"teeth is not given":                {"  channel: phase\n", "  channel: phase\n  index_channel: phase\n"},
		"the index is one or the other":     {"  channel: phase\n", "  channel: phase\n  teeth: 60\n  missing: 2\n  index_channel: a1\n"},
	} {
		if _, err := skid.Parse("gear.yaml", exampleText(t, edit)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("wanted %q, got %v", want, err)
		}
	}
}
