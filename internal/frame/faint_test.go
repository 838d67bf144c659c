package frame

import (
	"math"
	"testing"
)

// The noise that teeth show against the noise that was put in, and where teeth begin to be lost or split: a signal that
// does neither must stand above Status.Least of the noise, one that does must not stand far above it.
func TestFaintTeeth(t *testing.T) {
	for _, c := range []struct {
		name string
		set  func(*cogs)
	}{
		{"60-2", func(*cogs) {}},
		{"36-1, slow", func(s *cogs) { s.wheel, s.rpm, s.rate, s.seconds = Wheel{Teeth: 36, Missing: 1}, 200, 20000, 6 }},
		{"12+1, coil", func(s *cogs) { s.coil, s.wheel = true, Wheel{Teeth: 12, Extra: true} }},
	} {
		for _, over := range []float64{200, 40, 20, 10} {
			s := usualCogs()
			s.seconds = 2
			c.set(&s)
			s.noise = math.Abs(s.height) / over
			got, st := frames(t, s.config(), cutUp(s.signal(), 512))
			hurt := 0
			for _, f := range got {
				if f.Q&(LostTooth|Extra|Missing|Bounced|Weak) != 0 {
					hurt++
				}
			}
			ratio := st.Height / st.Noise
			if read := ratio / over; !(read > 0.8 && read < 2.2) {
				t.Errorf("%s, swing %g × noise: said to be %.1f ×", c.name, over, ratio)
			}
			if hurt > 0 && ratio > st.Least || hurt == 0 && ratio < st.Least/2 {
				t.Errorf("%s: %d turns hurt at %.1f times the noise as read, the limit is %g", c.name, hurt, ratio, st.Least)
			}
			if s := st.State; s != StateRunning {
				t.Errorf("%s, swing %g × noise: %v", c.name, over, s)
			}
			t.Logf("%s, swing %g × noise: %d of %d turns marked; said to be %.1f ×, %v", c.name, over, hurt, len(got), ratio, st.State)
		}
	}
}
