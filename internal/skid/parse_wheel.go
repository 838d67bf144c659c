package skid

import (
	"fmt"
	"math"

	"lapwing/internal/frame"
)

const wheelFix = "a wheel called 60-2 is `teeth: 60` and `missing: 2`, 36-2-1 is `teeth: 36`, `missing: 2` and `also_missing: [17]`, 12+1 is `teeth: 12` and `extra: 1`, a ring gear beside a sensor with one mark a turn is `teeth: 90` and `index_channel: …`; for one mark a turn leave teeth out"

// margin is by how much the shaft may run faster than max_rpm before its marks are not believed.
const margin = 1.5

// wheel reads the toothed wheel of the shaft reference, if there is one.
func (r *reader) wheel(s *object, sk *Skid) {
	p := &sk.Phase
	if n, ok := s.whole("marks_per_turn", 1, 512, false); ok && n != 1 {
		s.wrong("marks_per_turn", wheelFix, "%d marks a turn do not say where a turn begins", n)
		return
	}
	if !s.has("teeth") {
		for _, k := range []string{"missing", "extra", "also_missing", "index_channel"} {
			if s.has(k) {
				s.wrong(k, wheelFix, "this belongs to a toothed wheel, and teeth is not given")
			}
		}
		return
	}
	if s.has("marks_per_turn") {
		s.wrong("marks_per_turn", "delete it: teeth says it", "one mark a turn and a toothed wheel")
		return
	}
	var w frame.Wheel
	ok := true
	read := func(key string, lo, hi int) int {
		n, good := s.whole(key, lo, hi, false)
		ok = ok && (good || !s.has(key))
		return n
	}
	w.Teeth = read("teeth", 4, 512)
	w.Missing = read("missing", 1, 128)
	w.Extra = read("extra", 1, 1) == 1
	for i, n := range s.list("also_missing", 1, 32, false, "list the pitches after the opening tooth: also_missing: [17]") {
		var at int
		if err := n.Decode(&at); err != nil {
			r.problem(place(n), fmt.Sprintf("%s[%d]", join2(s.path, "also_missing"), i), "list whole numbers of pitches: also_missing: [17]", "%s where a whole number belongs", what(n))
			return
		}
		w.Also = append(w.Also, at)
	}
	if s.has("index_channel") {
		p.Index, _ = s.text("index_channel", inputID, "the id of the channel with one mark a turn", false)
		w.Separate = p.Index != ""
		if p.Index != "" {
			r.refer(sk, join2(s.path, "index_channel"), s.fields["index_channel"], p.Index, PhaseMark)
		}
		if p.Index != "" && p.Index == p.Channel {
			s.wrong("index_channel", "name the channel of the sensor that sees one mark a turn; channel is that of the teeth", "teeth and mark are on one channel")
			return
		}
	}
	if !ok || w.Teeth == 0 {
		return
	}
	if err := w.Check(); err != nil {
		s.wrong("teeth", wheelFix, "%v", err)
		return
	}
	if n := sk.Rate * 60 / (margin * sk.Machine.MaxRPM * float64(w.Teeth)); sk.Rate > 0 && sk.Machine.MaxRPM > 0 && n < frame.MinPitch {
		s.wrong("teeth", fmt.Sprintf("raise sampling_hz to %s, or use a wheel of fewer teeth or one mark a turn", short(math.Ceil(frame.MinPitch/n*sk.Rate))),
			"%s samples from tooth to tooth at %s rpm are too few", short(math.Floor(n*10)/10), short(margin*sk.Machine.MaxRPM))
		return
	}
	p.Wheel, p.MarksPerTurn = w, w.Marks()
}
