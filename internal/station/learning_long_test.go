package station

import (
	"fmt"
	"strings"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// lineRatio plays a machine at its rated speed and its stages' ratios less one times a factor.
func lineRatio(sk *skid.Skid, factor float64) model.Script {
	lines := append([]skid.Line{}, sk.Process.Stages...)
	for i := range lines {
		lines[i].Pd = lines[i].Ps * (1 + (lines[i].Pd/lines[i].Ps-1)*factor)
	}
	return model.Script{Lines: lines, RPM: sk.Machine.RatedRPM, Step: sk.Process.Step}
}

// Learning runs of the three example machines, healthy at several ratios, load steps and draws of valves, and with 1, 2 and 4 % of
// throughput lost in one path of one throw all the while. Prints what is said of each; a doubt about a healthy machine
// fails it.
func TestFieldContaminatedLearning(t *testing.T) {
	longOnly(t)
	for _, name := range []string{"biomethane-two-throw.yaml", "hydrogen-makeup.yaml", "fast-small.yaml"} {
		var healthy *duty.Baseline
		t.Run(name+" healthy", func(t *testing.T) {
			n := 0
			silent := func(what string, seed uint64, s func(sk *skid.Skid) model.Script) *duty.Baseline {
				sk := configSkid(t, name)
				b, _ := contaminated(t, sk, s(sk), seed, "", 0, nil)
				for _, d := range b.Doubts {
					t.Errorf("%s, draw %d: %s", what, seed, d)
				}
				n++
				return b
			}
			for seed := uint64(1); seed <= 2; seed++ {
				for _, factor := range []float64{0.7, 1, 1.3} {
					b := silent(fmt.Sprintf("ratio less one ×%g", factor), seed, func(sk *skid.Skid) model.Script { return lineRatio(sk, factor) })
					if seed == 1 && factor == 1 {
						healthy = b
					}
				}
			}
			for _, step := range configSkid(t, name).Steps {
				if len(step.Idle) == 4 {
					continue // all ends of two throws: nothing is compressed then
				}
				silent(step.Name, 3, func(sk *skid.Skid) model.Script {
					s := lineRatio(sk, 1)
					s.Step = step.Code
					return s
				})
			}
			t.Logf("%d healthy runs", n)
		})
		t.Run(name, func(t *testing.T) {
			if healthy == nil {
				t.Skip("needs the healthy runs")
			}
			sk := configSkid(t, name)
			for i := range sk.Throws {
				for _, path := range pathsOf(&sk.Throws[i]) {
					row := fmt.Sprintf("%-12s", path)
					for _, percent := range []float64{1, 2, 4} {
						b, mm2 := contaminated(t, configSkid(t, name), lineRatio(sk, 1), 1, path, percent, onlyThrow(healthy, i))
						subject, right, others := path, "not seen", ""
						if !strings.HasSuffix(path, ".rings") {
							subject = groupOf(path)
						}
						for _, d := range b.Doubts {
							if d.Subject == subject {
								right = "said"
							} else {
								others += ", also " + d.Subject + " " + d.Text
							}
						}
						row += fmt.Sprintf("  %g %% (%.1f mm²): %s%s", percent, mm2, right, others)
					}
					t.Log(row)
				}
			}
		})
	}
}

func pathsOf(th *skid.Throw) (out []string) {
	for e := range th.Ends {
		if th.Ends[e].Works {
			out = append(out, th.Ends[e].Suction[0].ID, th.Ends[e].Discharge[0].ID)
		}
	}
	if th.Ends[crank.HE].Works && th.Ends[crank.CE].Works {
		out = append(out, th.ID+".rings")
	}
	return out
}

func onlyThrow(b *duty.Baseline, throw int) *duty.Baseline {
	c := &duty.Baseline{}
	for i := range b.Cells {
		if b.Cells[i].Throw == throw {
			c.Cells = append(c.Cells, b.Cells[i])
		}
	}
	return c
}
