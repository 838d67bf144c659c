package station

import (
	"context"
	"errors"
	"strings"
	"testing"
	"time"
)

// A run that learns has its reference clips afterwards: one of the day, one of the baseline, the second labelled.
func TestReferenceClips(t *testing.T) {
	t.Parallel()
	r := recorded(t)
	state := t.TempDir()
	s, err := Open(Options{SkidFile: r.skid, State: state, Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Learn: takeLearn, Listen: "none"})
	if err != nil {
		t.Fatal(err)
	}
	if s.info.Start.IsZero() { // the recording does not say: any day will do
		s.info.Start = time.Date(2031, 5, 4, 12, 0, 0, 0, time.UTC)
		s.line.info.Start = s.info.Start
	}
	ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
	defer cancel()
	err = s.Run(ctx)
	var ids []string
	for _, c := range s.tape.Clips() {
		ids = append(append(ids, c.ID), c.Merged...)
		if strings.Contains(c.Reason, "baseline 1 came into force") && c.Label != "baseline 1" {
			t.Errorf("the baseline's clip may be released for room: %+v", c)
		}
	}
	if err := errors.Join(err, s.Close()); err != nil {
		t.Fatal(err)
	}
	all := strings.Join(ids, " ")
	for _, want := range []string{referenceID + "2031-05-04", baselineClipID + "1"} {
		if !strings.Contains(all, want) {
			t.Errorf("no %s among %s", want, all)
		}
	}
}
