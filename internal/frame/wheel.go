package frame

import (
	"fmt"
	"math"
	"slices"
)

// Wheel is a toothed wheel on the shaft whose teeth the phase sensor sees. The zero value is one mark a turn.
//
// Teeth counts the equal pitches of a turn, also those whose tooth was taken out. Mark 0, which opens a turn and from
// which dead-centre angles count, is the first regular tooth after the index: after the Missing teeth, or after the
// extra one. The mark of a tooth is its active edge (Config.Edge). A wheel called 60-2 is {Teeth: 60, Missing: 2},
// 36-2-1 is {Teeth: 36, Missing: 2, Also: []int{17}}, 12+1 is {Teeth: 12, Extra: true}.
type Wheel struct {
	Teeth   int       // 0: one mark a turn
	Missing int       // teeth missing in a row before mark 0
	Extra   bool      // one tooth more, half a pitch before mark 0
	Also    []int     // further missing teeth, as whole pitches after mark 0, increasing
	Degrees []float64 // measured angles of the marks after mark 0, like Angles; nil: equal pitches

	// Separate says that all teeth are alike and that a sensor of its own sees one mark a turn (Config.Index): mark 0 is
	// the first tooth after that mark.
	Separate bool
}

// Limits of a wheel.
const (
	leastTeeth = 4
	mostTeeth  = 512
)

// Marks gives the number of marks a turn: 1 without teeth.
func (w Wheel) Marks() int {
	if w.Teeth == 0 {
		return 1
	}
	n := w.Teeth - w.Missing - len(w.Also)
	if w.Extra {
		n++
	}
	return n
}

// Angles gives the degrees after mark 0 of the further marks in a turn, increasing: what Frame.Inner holds the sample
// positions of. Nil without teeth.
func (w Wheel) Angles() []float64 {
	if w.Teeth == 0 {
		return nil
	}
	if w.Degrees != nil {
		return slices.Clone(w.Degrees)
	}
	var out []float64
	pitch := 360 / float64(w.Teeth)
	for i := 1; i < w.Teeth-w.Missing; i++ {
		if !slices.Contains(w.Also, i) {
			out = append(out, float64(i)*pitch)
		}
	}
	if w.Extra {
		out = append(out, 360-pitch/2)
	}
	return out
}

func (w Wheel) String() string {
	switch {
	case w.Teeth == 0:
		return "one mark"
	case w.Separate:
		return fmt.Sprintf("%d and a mark apart", w.Teeth)
	case w.Extra:
		return fmt.Sprintf("%d+1", w.Teeth)
	}
	s := fmt.Sprintf("%d-%d", w.Teeth, w.Missing)
	for i, a := range w.Also { // neighbours are one gap
		if i > 0 && a == w.Also[i-1]+1 {
			continue
		}
		n := 1
		for i+n < len(w.Also) && w.Also[i+n] == a+n {
			n++
		}
		s += fmt.Sprintf("-%d", n)
	}
	return s
}

// Check says what is wrong with a wheel: a number out of range, or nothing by which one turn could be told from the
// next.
func (w Wheel) Check() error {
	if w.Teeth == 0 {
		if w.Missing != 0 || w.Extra || w.Also != nil || w.Degrees != nil || w.Separate {
			return fmt.Errorf("a wheel without teeth")
		}
		return nil
	}
	if w.Teeth < leastTeeth || w.Teeth > mostTeeth {
		return fmt.Errorf("wheel of %d teeth, want %d to %d", w.Teeth, leastTeeth, mostTeeth)
	}
	if w.Missing < 0 || w.Missing > w.Teeth/4 {
		return fmt.Errorf("wheel of %d teeth with %d missing, want at most a quarter", w.Teeth, w.Missing)
	}
	if w.Separate && (w.Extra || w.Missing > 0 || w.Also != nil) {
		return fmt.Errorf("wheel with an index of its own and a mark apart: the index is one or the other")
	}
	if w.Extra && w.Missing > 0 {
		return fmt.Errorf("wheel with an extra tooth and %d missing: the index is one or the other", w.Missing)
	}
	last := 0
	for _, a := range w.Also {
		if a <= last || a >= w.Teeth-w.Missing-1 {
			return fmt.Errorf("further missing teeth %v are not increasing within 1 to %d", w.Also, w.Teeth-w.Missing-2)
		}
		last = a
	}
	if w.Marks() < leastTeeth {
		return fmt.Errorf("wheel with %d teeth left, want at least %d", w.Marks(), leastTeeth)
	}
	nominal := Wheel{Teeth: w.Teeth, Missing: w.Missing, Extra: w.Extra, Also: w.Also}.Angles()
	if w.Degrees != nil {
		if len(w.Degrees) != len(nominal) {
			return fmt.Errorf("%d measured tooth angles, the wheel has %d marks after mark 0", len(w.Degrees), len(nominal))
		}
		for i, d := range w.Degrees {
			if !(math.Abs(d-nominal[i]) < 0.25*360/float64(w.Teeth)) {
				return fmt.Errorf("tooth %d measured at %v°, more than a quarter pitch from %v°", i+1, d, nominal[i])
			}
		}
	}
	if !w.Separate && w.repeats() {
		return fmt.Errorf("wheel %v looks the same several times a turn: nothing tells where a turn begins", w)
	}
	return nil
}

// repeats reports whether the wheel turned by some marks looks like itself.
func (w Wheel) repeats() bool {
	at := Wheel{Teeth: w.Teeth, Missing: w.Missing, Extra: w.Extra, Also: w.Also}.pitches()
	n := len(at) - 1
	for by := 1; by < n; by++ {
		alike := true
		for i := range n {
			j := (i + by) % n
			alike = alike && math.Abs((at[i+1]-at[i])-(at[j+1]-at[j])) < 0.1
		}
		if alike {
			return true
		}
	}
	return false
}

// pitches gives the places of all marks from mark 0 to the next turn's, in pitches.
func (w Wheel) pitches() []float64 {
	at := []float64{0}
	for _, d := range w.Angles() {
		at = append(at, d*float64(w.Teeth)/360)
	}
	return append(at, float64(w.Teeth))
}
