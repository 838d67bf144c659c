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

// Learning runs of the three example machines, healthy at several ratios and draws of valves, and with 1, 2 and 4 % of
// throughput lost in one path of one throw all the while. Prints what is said of each; a doubt about a healthy machine
// fails it.
func TestFieldContaminatedLearning(t *testing.T) {
	longOnly(t)
	for _, name := range []string{"biomethane-two-throw.yaml", "hydrogen-makeup.yaml", "fast-small.yaml"} {
		healthy := map[float64]*duty.Baseline{}
		n := 0
		for _, factor := range []float64{0.7, 1, 1.3} {
			for seed := uint64(1); seed <= 2; seed++ {
				sk := configSkid(t, name)
				b, _ := contaminated(t, sk, lineRatio(sk, factor), seed, "", 0, nil)
				if n++; seed == 1 {
					healthy[factor] = b
				}
				for _, d := range b.Doubts {
					t.Errorf("%s, healthy, ratio ×%g, draw %d: %s", name, factor, seed, d)
				}
			}
		}
		t.Logf("%s: %d healthy runs", name, n)
		sk := configSkid(t, name)
		for i := range sk.Throws {
			th := &sk.Throws[i]
			paths := []string{}
			for e := range th.Ends {
				if th.Ends[e].Works {
					paths = append(paths, th.Ends[e].Suction[0].ID, th.Ends[e].Discharge[0].ID)
				}
			}
			if th.Ends[crank.HE].Works && th.Ends[crank.CE].Works {
				paths = append(paths, th.ID+".rings")
			}
			for _, path := range paths {
				row := fmt.Sprintf("%-12s", path)
				for _, percent := range []float64{1, 2, 4} {
					right, other := 0, []string{}
					factors := []float64{1}
					for _, factor := range factors {
						sk := configSkid(t, name)
						b, _ := contaminated(t, sk, lineRatio(sk, factor), 1, path, percent, onlyThrow(healthy[factor], i))
						hit := false
						for _, d := range b.Doubts {
							if d.Subject == path || strings.Contains(path, ".s") && d.Subject == groupOf(path) || strings.Contains(path, ".d") && d.Subject == groupOf(path) {
								hit = true
							} else {
								other = append(other, d.Subject+" "+d.Text)
							}
						}
						if hit {
							right++
						}
					}
					row += fmt.Sprintf("  %g %%: %d of %d %v", percent, right, len(factors), other)
				}
				t.Log(row)
			}
		}
	}
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
