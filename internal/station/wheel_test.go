package station

import (
	"context"
	"errors"
	"io"
	"math"
	"testing"
	"time"

	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// TestLineWithAToothedWheel: the same shaft seen through one mark with its ripple stated, and through a 60-2 wheel with no
// word of the ripple, gives the same dead centres and the same opening angles.
func TestLineWithAToothedWheel(t *testing.T) {
	parse := func(cuts ...[2]string) *skid.Skid { return exampleWith(t, cuts...) }
	one := parse()
	wheel := parse([2]string{"  channel: phase\n", "  channel: phase\n  teeth: 60\n  missing: 2\n"})
	seen := func(sk *skid.Skid) (at []float64, opens []float64) {
		src, err := acqmodel.Open(sk, model.Script{RPM: 740}, acqmodel.Options{Seed: 5, Duration: 2 * time.Second})
		if err != nil {
			t.Fatal(err)
		}
		told := *sk
		if sk == wheel {
			told.Phase.Ripple, told.Phase.Uncertainty = nil, 0
		}
		line, err := NewLine(&told, src.Info(), fixed(sk), LearnPlan{}, nil, alarm.New(AlarmTiming(&told)))
		if err != nil {
			t.Fatal(err)
		}
		var b acq.Block
		for {
			err := src.Read(context.Background(), &b)
			if errors.Is(err, io.EOF) {
				break
			}
			if err == nil {
				err = line.Add(&b, func(o *Output) {
					if !o.Record.Valid {
						return
					}
					at = append(at, float64(o.At.UnixNano())*1e-9)
					for _, e := range o.Record.Throws[0].Ends[0].Events {
						if e.Event == "discharge.opens" && e.Angle != nil {
							opens = append(opens, *e.Angle)
						}
					}
				})
			}
			if err != nil {
				t.Fatal(err)
			}
		}
		return at, opens
	}
	at1, opens1 := seen(one)
	at2, opens2 := seen(wheel)
	if len(at2) < 18 || len(opens2) < 12 {
		t.Fatalf("%d valid turns with %d openings of about 24 (one mark: %d, %d)", len(at2), len(opens2), len(at1), len(opens1))
	}
	worst, met := 0.0, 0
	for _, a := range at1 {
		for _, b := range at2 {
			if deg := math.Abs(a-b) * 740 * 6; deg < 20 {
				worst, met = math.Max(worst, deg), met+1
			}
		}
	}
	d := mean(opens1) - mean(opens2)
	t.Logf("%d and %d turns, dead centres within %.3f°, openings at %.2f° and %.2f°", len(at1), len(at2), worst, mean(opens1), mean(opens2))
	if met < 15 || worst > 0.05 || math.Abs(d) > 0.15 {
		t.Errorf("dead centres of %d turns within %.3f°, openings %.3f° apart", met, worst, d)
	}
}
