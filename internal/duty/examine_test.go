package duty

import (
	"math"
	"strings"
	"testing"

	"lapwing/internal/measure"
)

// healthyValues are what the modelled example machine shows (configs/biomethane-two-throw.yaml), in the units people
// read. Keys are the subject's part after the throw and the measure.
var healthyValues = map[string]float64{
	".he n_comp_late": 1.292, ".he n_exp_late": 1.297, ".ce n_comp_late": 1.294, ".ce n_exp_late": 1.300, ".he flow_balance": 1.004, ".ce flow_balance": 1.003,
	".he.suction leak_percent": 0.4, ".he.discharge leak_percent": 0.5, ".ce.suction leak_percent": 0.55, ".ce.discharge leak_percent": 0.55, ".rings leak_percent": 1.2,
	".he.suction leak_noise_db": -7.7, ".he.discharge leak_noise_db": -8.9, ".ce.suction leak_noise_db": -8.1, ".ce.discharge leak_noise_db": -8.8,
	".he t_excess_k": -0.2, ".ce t_excess_k": -0.2, ".he leak_zero_bar": 0.01, ".ce leak_zero_bar": -0.01, ".he indicated_work_j": 3000, ".ce indicated_work_j": 2800,
}

// shown learns a machine that shows the healthy values with some changed; a change to NaN takes the value away.
func shown(t *testing.T, layout measure.Layout, change map[string]float64) *Baseline {
	t.Helper()
	l := NewLearner(layout, LearnConfig{})
	v := measure.Vector{V: make([]float64, len(layout))}
	for i, f := range layout {
		id, _, _ := strings.Cut(f.Subject, ".")
		key := strings.TrimPrefix(f.Subject, id) + " " + f.Name
		x, ok := healthyValues[key]
		if c, has := change[f.Subject+" "+f.Name]; has {
			x, ok = c, true
		}
		if v.V[i] = math.NaN(); ok {
			v.V[i] = (x - f.Shift) / f.Scale
		}
	}
	for turn := range 60 {
		v.Turn = int64(turn)
		for throw := range 2 {
			l.Add(throw, Point{State: Steady, Step: 3, RPM: 740, Ps: 8e5, Pd: 22e5, OwnPs: math.NaN(), OwnPd: math.NaN()}, &v)
		}
	}
	b, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func TestExamination(t *testing.T) {
	layout := twoThrows()
	gone := math.NaN()
	single := map[string]float64{} // throw 1 with its head end alone, as a single-acting cylinder of fast-small.yaml shows
	for _, f := range layout {
		if strings.HasPrefix(f.Subject, "t1.ce") || f.Subject == "t1.rings" {
			single[f.Subject+" "+f.Name] = gone
		}
	}
	with := func(base map[string]float64, more map[string]float64) map[string]float64 {
		out := map[string]float64{}
		for k, v := range base {
			out[k] = v
		}
		for k, v := range more {
			out[k] = v
		}
		return out
	}
	alone := with(single, map[string]float64{"t1.he indicated_work_j": 9000, "t1.he.suction leak_percent": 3.1, "t1.he.discharge leak_percent": 2.1, "t1.he n_comp_late": 1.292, "t1.he n_exp_late": 1.297})
	for name, c := range map[string]struct {
		change  map[string]float64
		subject string // of the one doubt; empty: none
		part    string // of what it says
	}{
		"healthy": {nil, "", ""},
		"2 % in one suction group": {map[string]float64{"t1.he.suction leak_percent": 2.4, "t1.he n_comp_late": 1.285, "t1.he n_exp_late": 1.306, "t1.he flow_balance": 1.016, "t1.he.suction leak_noise_db": -4}, "t1.he.suction",
			"leak area reads 2.4 % of throughput, t1.ce.suction 0.6 %; late exponents, compression less expansion, -0.021 against -0.006; flow balance 1.016 against 1.003; leak noise -4.0 dB against -8.1 dB"},
		"areas alone":                              {map[string]float64{"t2.ce.discharge leak_percent": 1.9}, "t2.ce.discharge", "t2.he.discharge 0.5 %"},
		"a little, and nothing else":               {map[string]float64{"t2.ce.discharge leak_percent": 1.4}, "", ""},
		"a little, and the noise says so too":      {map[string]float64{"t2.ce.discharge leak_percent": 1.4, "t2.ce.discharge leak_noise_db": -6}, "t2.ce.discharge", "leak noise"},
		"both ends of a throw, against its twin":   {map[string]float64{"t1.he.suction leak_percent": 2.4, "t1.ce.suction leak_percent": 2.5}, "t1.he.suction+t1.ce.suction", "t2.he.suction 0.4 %"},
		"far beyond heat":                          {map[string]float64{"t1.he.suction leak_percent": 6, "t1.ce.suction leak_percent": 6, "t2.he.suction leak_percent": 6, "t2.ce.suction leak_percent": 6}, "t1.he.suction+t1.ce.suction+t2.he.suction+t2.ce.suction", "wall heat explains 5.0 %"},
		"rings":                                    {map[string]float64{"t1.rings leak_percent": 4.5}, "t1.rings", "needs no reference"},
		"flow":                                     {map[string]float64{"t1.he flow_balance": 1.06}, "t1.he", "flow balance 1.060"},
		"hot":                                      {map[string]float64{"t1.he t_excess_k": 22}, "t1.he", "22 K above"},
		"zero":                                     {map[string]float64{"t1.he leak_zero_bar": 0.4}, "t1.he", "+0.40 bar"},
		"exponents apart":                          {map[string]float64{"t1.he n_comp_late": 1.36, "t1.he n_exp_late": 1.22}, "t1.he", "opposite directions"},
		"exponents together":                       {map[string]float64{"t1.he n_comp_late": 1.36, "t1.he n_exp_late": 1.37}, "t1.he", "dead centre"},
		"single-acting, healthy":                   {alone, "", ""},
		"single-acting, discharge":                 {with(alone, map[string]float64{"t1.he.discharge leak_percent": 4.2, "t1.he n_comp_late": 1.305, "t1.he n_exp_late": 1.29}), "t1.he.discharge", "the end's suction group 3.1 %"},
		"single-acting, suction or rings":          {with(alone, map[string]float64{"t1.he.suction leak_percent": 4.9, "t1.he n_comp_late": 1.28, "t1.he n_exp_late": 1.31}), "t1.he.suction", "it or the rings"},
		"single-acting, areas without a witness":   {with(alone, map[string]float64{"t1.he.discharge leak_percent": 4.2}), "", ""},
		"one end rests, the twin's does not":       {with(single, map[string]float64{"t1.he.suction leak_percent": 1.9}), "", ""},
		"late closing, no ring area":               {map[string]float64{"t1.rings leak_percent": gone, "t1.he.suction leak_percent": 4.4}, "", ""},
		"late closing, discharge":                  {map[string]float64{"t1.rings leak_percent": gone, "t1.he.discharge leak_percent": 2}, "t1.he.discharge", "t1.ce.discharge 0.6 %"},
		"nothing is known of the leaks and no gas": {map[string]float64{"t1.he.suction leak_percent": gone, "t1.he n_comp_late": gone}, "", ""},
	} {
		t.Run(name, func(t *testing.T) {
			b := shown(t, layout, c.change)
			k := func(throw int, rpm, ps, pd float64) float64 {
				if math.Abs(ps/8e5-1) > 1e-6 || math.Abs(pd/22e5-1) > 1e-6 || rpm != 740 {
					t.Errorf("the gas is asked for at %g rpm, %g and %g Pa", rpm, ps, pd)
				}
				return 1.295
			}
			var got []string
			said := ""
			for _, d := range b.Examine(layout, k) {
				got, said = append(got, d.Subject), said+d.String()+"\n"
			}
			if strings.Join(got, "+") != c.subject || !strings.Contains(said, c.part) {
				t.Errorf("%s", said)
			}
		})
	}
}
