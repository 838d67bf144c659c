package duty

import (
	"math"
	"strings"

	"lapwing/internal/measure"
)

// floor is the least spread of a block's residual that is believed for a kind of feature: what an exact duty model and
// endless averaging would still leave, because the duty itself is never known exactly. abs is in the unit that people
// read, rel is a share of the feature's usual value; the larger counts.
type floor struct {
	name     string // exact; a prefix when it ends in *
	abs, rel float64
}

// Measured block spreads are in reference/leaks.md section 4 (four modelled machines under load swings, 28-turn
// blocks) and vibration.md sections 1, 3 and 6; the rest is the believable accuracy of the process values behind it.
var floors = []floor{
	{"n_exp_late", 0.0008, 0}, // measured 0.0005; a little over, as this duty model has fewer terms
	{"n_exp_early", 0.0018, 0},
	{"n_comp_early", 0.0014, 0},
	{"n_comp_late", 0.0010, 0},
	{"n_*", 0.002, 0},
	{"mass_*", 0.06, 0}, // measured 0.05 %
	{"suction_opens_late_deg", 0.10, 0},
	{"discharge_opens_late_deg", 0.10, 0}, // measured 0.05-0.09°
	{"ve_*", 0.3, 0},                      // measured 0.05-0.11 points, more where the process values come late in swings
	{"flow_balance", 0.015, 0},            // measured 0.013, and it drifts with the temperatures
	{"leak_percent", 0.06, 0},             // measured 0.04-0.16 % of throughput, by path and machine
	{"leak_area_mm2", 0.5, 0},             // where the throughput is not known; leak_percent fits machines of any size
	{"leak_phase_deg", 0.03, 0},
	{"leak_zero_bar", 0.02, 0},
	{"leak_residual", 0, 0.2},
	{"suction_opens_deg", 0.25, 0}, // regressed on the duty, where the *_late ones need it hardly
	{"discharge_opens_deg", 0.25, 0},
	{"suction_closes_deg", 2, 0}, // ill-conditioned at full load (windows.md)
	{"discharge_closes_deg", 0.5, 0},
	{"leak_noise_db", 0.6, 0},
	{"leak_shape", 0.02, 0},
	{"impact_ln", 0.10, 0}, // openings; closings below
	{"impact_norm_ln", 0.10, 0},
	{"extra_hits_45", 2.5, 0}, // ten in 45 turns are then three spreads over a healthy rate of 0.05 a turn (vibration.md section 4)
	{"pin_*", 1.5, 0},
	{"peak_g", 0, 0.15},
	{"rms_g", 0, 0.12},
	{"lag_ms", 0.03, 0.10},          // healthy blocks spread over −27…+20 % under load swings (vibration.md section 4)
	{"suction_loss_kw", 0.05, 0.12}, // follows a pressure difference of a few per cent
	{"discharge_loss_kw", 0.05, 0.12},
	{"power_kw", 0, 0.015},
	{"indicated_power_kw", 0, 0.015},
	{"capacity_*", 0, 0.015},
	{"onset_deg", 0.5, 0},
	{"cover_c", 8, 0},    // K; it follows the duty by minutes, so that swings put it far off what the duty says
	{"cover_*", 1, 0},    // against its group
	{"t_excess_k", 5, 0}, // follows the duty by minutes
	{"t_*", 1, 0},
	{"reversal_*", 1.5, 0.05},
	{"*", 0, 0.01},
}

// sysFloor gives the floor in the feature's SI unit for a usual value (SI).
func sysFloor(f measure.Feature, usual float64) float64 {
	scale := math.Abs(f.Scale)
	if scale == 0 {
		scale = 1
	}
	fl := floors[len(floors)-1]
	for _, c := range floors {
		if p, ok := strings.CutSuffix(c.name, "*"); (ok && strings.HasPrefix(f.Name, p)) || c.name == f.Name {
			fl = c
			break
		}
	}
	abs, rel := fl.abs, fl.rel
	if strings.HasSuffix(f.Subject, ".closes") { // closings cannot be predicted (vibration.md section 1)
		switch f.Name {
		case "impact_ln":
			abs = 0.35
		case "peak_g", "rms_g":
			rel = 0.35
		}
	}
	return math.Max(abs/scale, rel*math.Abs(usual))
}
