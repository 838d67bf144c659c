package verdict

import (
	"math"
	"strings"
	"testing"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
)

// An explanation says of every hypothesis what was heard, what it weighs, and what the next grade would take; asking
// changes nothing.
func TestExplainAgreesWithTheFindings(t *testing.T) {
	s, r := commissioned(t, 21)
	if _, ok := r.judge.Explain(); ok {
		t.Error("explained before the first block")
	}
	twin := r.fresh().judge
	blocks, cut := 0, 0
	check := func(blk duty.Block, fs []Finding) {
		blocks++
		x, ok := r.judge.Explain()
		if !ok || x.Turn1 != blk.Turn1 || x.ID != "t1" || !x.Ends[0].Judged || len(x.Cases) == 0 {
			t.Fatalf("%+v", x)
		}
		twin.Judge(blk)
		if a, b := len(r.judge.Findings()), len(twin.Findings()); a != b {
			t.Fatalf("asking changed the judge: %d and %d findings", a, b)
		}
		for _, c := range x.Cases {
			if !c.Judged {
				if c.Why == "" {
					t.Errorf("%s %s not judged and no reason", c.Subject, c.Kind)
				}
				continue
			}
			if c.Grade == None && len(c.Missing) == 0 {
				t.Errorf("%s %s: nothing raised and nothing missing", c.Subject, c.Kind)
			}
			total := 0.0
			for _, v := range c.Classes {
				total += v.Median
				if v.LLR > capHi || v.LLR < capLo {
					t.Errorf("%s %s: %v beyond its caps", c.Subject, c.Kind, v)
				}
				if math.IsNaN(v.LLR) != math.IsNaN(v.Raw) || math.IsNaN(v.LLR) && v.Why == "" {
					t.Errorf("%s %s: absent without a reason: %+v", c.Subject, c.Kind, v)
				}
				if v.Raw > v.LLR+1e-9 && v.LLR < capHi && v.Why == "" {
					t.Errorf("%s %s: %s was %.2f, counts %.2f, and no rule says why", c.Subject, c.Kind, v.Class, v.Raw, v.LLR)
				}
				if v.Why != "" && v.LLR <= 0 && v.Raw > 1 {
					cut++
				}
				sum, heard := 0.0, false
				for _, e := range c.Evidence {
					if e.Class == v.Class {
						sum, heard = sum+e.Weight, true
					}
					if e.Text == "" || e.Spread <= 0 {
						t.Errorf("%s %s: %+v", c.Subject, c.Kind, e)
					}
				}
				if heard && sum > 0 && math.Abs(sum-v.LLR) > 1e-9 {
					t.Errorf("%s %s: parts of %s sum to %.3f of %.3f", c.Subject, c.Kind, v.Class, sum, v.LLR)
				}
			}
			if math.Abs(total-c.Total) > 1e-9 {
				t.Errorf("%s %s: classes sum to %g, total %g", c.Subject, c.Kind, total, c.Total)
			}
		}
		for _, f := range fs {
			for _, c := range x.Cases {
				if c.Subject == f.Subject && c.Kind == f.Kind && (c.Grade != f.Grade || c.Total != f.Odds) {
					t.Errorf("%s: explained as %v %.2f", f.Sentence, c.Grade, c.Total)
				}
			}
		}
	}
	r.run(s, 100, nil, check)
	s.leak["t1.he.suction"] = 3
	r.run(s, 150, nil, check)
	s.idle[1] = true
	if blocks < 10 || cut == 0 {
		t.Errorf("%d blocks, %d votes held down", blocks, cut)
	}
}

// What would have raised a leak that nobody hears is the second class, and the explanation says so.
func TestExplainSaysWhatIsMissing(t *testing.T) {
	s, r := commissioned(t, 8)
	s.leak["t1.he.discharge"], s.quiet = 4, true
	r.run(s, 150, nil, func(duty.Block, []Finding) {})
	x, _ := r.judge.Explain()
	for _, c := range x.Cases {
		if c.Subject != "t1.he.discharge" || c.Kind != Leaking {
			continue
		}
		t.Log(c.Missing)
		if c.Grade != Advisory || !c.Pattern.Chosen || !strings.Contains(strings.Join(c.Missing, ";"), "second class must reach 2.5") {
			t.Errorf("%+v", c)
		}
		if v := c.Classes[measure.Pressure]; v.Median < advisoryClass || v.Strong < 3 {
			t.Errorf("pressure: %+v", v)
		}
		return
	}
	t.Error("not there")
}
