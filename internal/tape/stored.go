package tape

import "time"

// Stored is what is kept of a clip so far.
type Stored struct {
	From, To time.Time // UTC of its first and after its last sample; zero when the clock was not tied to UTC
	Bytes    int64     // that its segments take in the file
}

// Stored tells what is kept of a clip, by the index alone. Times are right to a second where a clip holds a single
// segment, else to the sample.
func (t *Tape) Stored(id string) (Stored, error) {
	c, err := t.Clip(id)
	if err != nil {
		return Stored{}, err
	}
	segs := t.clips.snapshot(c.covers)
	if len(segs) == 0 {
		return Stored{}, nil
	}
	var s Stored
	for i := range segs {
		s.Bytes += segs[i].size
	}
	first, last := &segs[0], &segs[len(segs)-1]
	if first.utc0 == 0 || last.utc0 == 0 {
		return s, nil
	}
	// Within a run the rate does not change: the times of two segments give it, whatever tape is open now.
	perSample := 0.0 // ns
	if last.seq0 > first.seq0 {
		perSample = float64(last.utc0-first.utc0) / float64(last.seq0-first.seq0)
	}
	s.From = time.Unix(0, first.utc0+int64(perSample*float64(max(0, c.From-first.seq0)))).UTC()
	s.To = time.Unix(0, last.utc0+int64(perSample*float64(min(last.end, c.To)-last.seq0))).UTC()
	return s, nil
}
