package station

import (
	"fmt"
	"math"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/sensor"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
)

// slip lets the fitted phase of every turn watch the phase reference: marks that come later or earlier than when the
// baseline was learnt move all throws alike.
type slip struct {
	*sensor.Slip
	channel int // of the phase reference
	id      string
	feature []int // by throw
}

func newSlip(sk *skid.Skid, layout measure.Layout) *slip {
	s := &slip{Slip: sensor.NewSlip(len(sk.Throws)), channel: -1, id: sk.Phase.Channel}
	for i := range sk.Channels {
		if sk.Channels[i].ID == sk.Phase.Channel {
			s.channel = i
		}
	}
	for i := range sk.Throws {
		s.feature = append(s.feature, layout.Find(sk.Throws[i].ID, "leak_phase_deg"))
	}
	return s
}

func (s *slip) compare(throw int, t *turn.Turn, p duty.Point, devs []duty.Deviation, to *sensors) {
	if p.State != duty.Steady || s.channel < 0 || s.feature[throw] < 0 {
		return
	}
	for i := range devs {
		if d := &devs[i]; d.Feature == s.feature[throw] && d.Seen && s.Add(throw, t.Number, d.Residual) {
			deg, doubt := s.Late()
			if math.IsNaN(deg) {
				continue // not enough yet; after a restart what stood goes on standing
			}
			why := ""
			if doubt {
				why = fmt.Sprintf("%s: the dead centres of %s have moved by %.2f° against the marks, which come too %s, since the baseline was learnt: usually the pick-up or its bracket, the wheel or target on the shaft, or the trigger edge",
					s.id, s.whose(t.Number), math.Abs(deg), [2]string{"late", "early"}[btoi(deg < 0)])
			}
			to.Tell(s.channel, sensor.Slipped, t.Number, t.Seq0, why)
		}
	}
}

func (s *slip) whose(turn int64) string {
	if n := s.Throws(turn); n > 1 {
		return fmt.Sprintf("all %d throws", n)
	}
	return "the only throw that tells"
}
