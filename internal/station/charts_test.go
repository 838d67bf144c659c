package station

import (
	"math"
	"testing"
)

// A reference is of the most alike duty: the load step counts before all, then speed and pressures, then steadiness.
func TestUnlikeDuties(t *testing.T) {
	now := &pictured{step: 1, steady: true, rpm: 900, ps: 8e5, pd: 20e5}
	order := []*pictured{
		{step: 1, steady: true, rpm: 905, ps: 8e5, pd: 20e5},
		{step: 1, steady: false, rpm: 900, ps: 8e5, pd: 20e5},
		{step: 1, steady: true, rpm: 900, ps: 7e5, pd: 20e5},
		{step: 1, steady: true, rpm: 450, ps: 8e5, pd: math.NaN()},
		{step: 0, steady: true, rpm: 900, ps: 8e5, pd: 20e5},
	}
	for i := range order {
		d := now.unlike(order[i])
		if i > 0 && d <= now.unlike(order[i-1]) {
			t.Errorf("%+v is nearer than %+v", order[i], order[i-1])
		}
		if (d <= alike) != (i < 2) {
			t.Errorf("%+v: distance %g", order[i], d)
		}
	}
}

func TestAxisWords(t *testing.T) {
	for name, want := range map[string]string{"leak_area_mm2": "leak area, mm²", "p_suction_bar_abs": "p suction, bar abs", "capacity_kg_h": "capacity, kg/h", "n_comp_late": "n comp late", "cover_c": "cover, °C", "peak_g": "peak, g", "rod_load_max_kn": "rod load max, kN"} {
		if got := axisWords(name); got != want {
			t.Errorf("%s: %q, want %q", name, got, want)
		}
	}
}
