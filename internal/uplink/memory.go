package uplink

import "fmt"

// mark identifies a transition: numbers rise by one in a journal, and a journal begins anew only when a skid's state
// folder is replaced.
type mark struct {
	journal string // "" from a daemon that does not name it
	id      uint64
	at      int64 // ns UTC
}

// remembered is how far back a repeat is known as one. A publisher has at most boxFlight transitions on their way.
const remembered = 16 * boxFlight

// memory knows which transitions of one skid have been shown. Only what is surely a repeat is dropped: a number that
// was shown before may also come from a new journal, and that must not swallow its alarms.
type memory struct {
	last  mark
	shown map[mark]bool
	ring  [remembered]mark
	n     int
}

// take says whether to show a transition, and what a reader should know about its number.
func (m *memory) take(k mark) (show bool, why string) {
	if m.shown[k] {
		return false, ""
	}
	switch first := m.n == 0; {
	case first:
	case k.journal != m.last.journal:
		why = fmt.Sprintf("its alarm journal is another one now; numbers go on from %d", k.id)
	case k.id == m.last.id+1:
	case k.id > m.last.id:
		why = fmt.Sprintf("transitions %d to %d did not reach this listener; what stands now is under standing", m.last.id+1, k.id-1)
	case k.at > m.last.at:
		why = fmt.Sprintf("numbers began again: %d comes after %d and is later; its state folder must have been replaced", k.id, m.last.id)
	default:
		m.remember(k)
		return true, fmt.Sprintf("number %d comes after %d and is no later: out of order, or a repeat from long ago", k.id, m.last.id)
	}
	m.remember(k)
	m.last = k
	return true, why
}

func (m *memory) remember(k mark) {
	if m.shown == nil {
		m.shown = map[mark]bool{}
	}
	at := m.n % remembered
	if m.n >= remembered {
		delete(m.shown, m.ring[at])
	}
	m.ring[at], m.shown[k] = k, true
	m.n++
}
