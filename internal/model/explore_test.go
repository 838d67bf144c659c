package model

import (
	"fmt"
	"math"
	"testing"
	"time"

	"lapwing/internal/acq"
)

func show(ts []Truth) {
	for _, t := range ts {
		f := func(e Event) string {
			return fmt.Sprintf("%6.1f/%6.1f %4.1f", e.Lift, e.Impact, e.Speed)
		}
		fmt.Printf("t%d e%d r%d | SO %s SC %s DO %s DC %s | in %.4f out %.4f leak %.2e %.2e %.2e %.1e P %.1f kW imp %d\n", t.Throw+1, t.End, t.Rev,
			f(t.Suction.Open), f(t.Suction.Close), f(t.Discharge.Open), f(t.Discharge.Close),
			t.Taken, t.Delivered, t.Leaked.Suction, t.Leaked.Discharge, t.Leaked.Rings, t.Leaked.Packing, t.Power/1e3, len(t.Impacts))
	}
}

func TestExplore(t *testing.T) {
	for _, rpm := range []float64{500, 740, 1000} {
		for _, ratio := range []float64{1.8, 2.75, 3.6} {
			sk := demo()
			sk.Process.Stages[0].Pd = 8e5 * ratio
			m, err := New(sk, Script{RPM: rpm}, Options{Seed: 1})
			if err != nil {
				t.Fatal(err)
			}
			var b acq.Block
			m.Fill(&b, int(1.2*51200))
			ts := m.Truths()
			fmt.Println(rpm, ratio)
			show(ts[len(ts)-2:])
			s, pk := 0.0, 0.0
			for _, c := range b.Counts[3] {
				v := float64(c) / float64(1<<23) * 10 * 98.0665
				s += v * v
				pk = math.Max(pk, math.Abs(v))
			}
			fmt.Println("acc rms", math.Sqrt(s/float64(b.N)), "peak", pk, b.Clip, b.Note)
		}
	}
	sk := demo()
	m, _ := New(sk, Script{}, Options{Seed: 1})
	t0 := time.Now()
	var b acq.Block
	for range 100 {
		m.Fill(&b, 5120)
	}
	fmt.Println("factor", 10/time.Since(t0).Seconds())
	fmt.Println(m.Process(9))
}
