package station

import (
	"fmt"
	"time"

	"lapwing/internal/duty"
	"lapwing/internal/tape"
)

// Reference clips are what an event is held against later: one a day, of steady running, which gives way when the clips'
// quota is full, and one with every baseline, which stays. Both stay apart from the clips of alarms: a healthy machine's
// samples with the event in them would be no reference.
const (
	referenceLong  = 30 * time.Second
	referenceID    = "reference-"
	baselineClipID = "baseline-"
)

// reference cuts the clips that are due with this turn. Compute goroutine.
func (s *Station) reference(o *Output) {
	if o.Turn == nil || !o.Turn.Valid() {
		return
	}
	if v := s.learning.inForce; v != s.referenced.baseline {
		if s.referenced.baseline = v; v != 0 && s.referenced.begun {
			s.cutReference(fmt.Sprintf("%s%d", baselineClipID, v), fmt.Sprintf("reference: baseline %d came into force", v), fmt.Sprintf("baseline %d", v), o)
		}
	}
	s.referenced.begun = true // a baseline that was in force at the start has its clip
	if s.info.Start.IsZero() {
		return // no day to count by
	}
	day := o.At.UTC().Format(time.DateOnly)
	if day == s.referenced.day {
		return
	}
	for i := range o.Points {
		if o.Points[i].State != duty.Steady {
			return
		}
	}
	s.referenced.day = day
	s.cutReference(referenceID+day, "reference: the first steady running of "+day, "", o)
}

func (s *Station) cutReference(id, why, label string, o *Output) {
	half := int64(referenceLong.Seconds() / 2 * s.info.Rate)
	if old, err := s.tape.Clip(id); err == nil && old.Run != s.tape.Run() {
		return // of this day there is one, from before a restart
	}
	c, err := s.cut(tape.Clip{ID: id, Reason: why, Apart: true, From: max(s.first, o.Turn.Seq0-half), To: o.Turn.Seq1 + half})
	if err == nil && label != "" && c.Label == "" {
		err = s.tape.Keep(c.ID, label)
	}
	if err != nil {
		s.log.Warn("no reference clip", "clip", id, "err", err)
	}
}

// referenced is what has been cut already.
type referenced struct {
	begun    bool
	baseline uint64
	day      string
}
