package leak

import (
	"math"
	"testing"
)

// The coarse sum over a turn against the sum over every point.
func TestMassByCoarseSum(t *testing.T) {
	for name, make := range machines() {
		s := make()
		s.run()
		in := s.input()
		st := in.states()
		coarse := in.massPerArea(&st)
		fine := in.massEvery(&st, 1)
		for j := range coarse {
			if d := coarse[j]/fine[j] - 1; math.Abs(d) > .003 {
				t.Errorf("%s: %s off by %.2f %%", name, pathNames[j], 100*d)
			}
		}
	}
}
