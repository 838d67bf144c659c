package station

import (
	"fmt"
	"strconv"
	"strings"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/panel"
	"lapwing/internal/wire"
)

// scansPerPage bounds the work for one page of a narrow filter: what is left is on the next page.
const scansPerPage = 10

// Journal gives a page of the alarm journal.
func (s *Station) Journal(f wire.JournalFilter) (wire.JournalPage, error) {
	p, err := readJournal(s.ledger, f)
	p.Skid = s.sk.ID
	return p, err
}

// JournalIn gives a page of the journal of a daemon that is down.
func JournalIn(state string, f wire.JournalFilter) (wire.JournalPage, error) {
	l, err := stateFile(state)
	if err != nil {
		return wire.JournalPage{}, err
	}
	defer l.Close()
	return readJournal(l, f)
}

// AlarmsIn gives the alarm points of a daemon that is down, as they were when it stopped.
func AlarmsIn(state string) (wire.Alarms, error) {
	l, err := stateFile(state)
	if err != nil {
		return wire.Alarms{}, err
	}
	defer l.Close()
	var snap alarm.Snapshot
	if _, err := l.AlarmSnapshot(&snap); err != nil {
		return wire.Alarms{}, err
	}
	out := wire.Alarms{Version: 1, Flood: snap.Flood, Points: []wire.Point{}, Caution: wire.Caution}
	for i := range snap.Points {
		out.Points = append(out.Points, wire.FromState(&snap.Points[i]))
	}
	return out, nil
}

func readJournal(l *ledger.Ledger, f wire.JournalFilter) (wire.JournalPage, error) {
	p := wire.JournalPage{Version: 1, Entries: []wire.Entry{}}
	if _, err := l.Doc(docJournal, &p.Journal); err != nil {
		return p, err
	}
	at := ledger.Place{}
	if !f.Oldest {
		at = ledger.End
	}
	if f.Page != "" {
		t, a, ok := strings.Cut(f.Page, ".")
		var err1, err2 error
		at.Transition, err1 = strconv.ParseUint(t, 10, 64)
		at.Act, err2 = strconv.ParseUint(a, 10, 64)
		if !ok || err1 != nil || err2 != nil {
			return p, fmt.Errorf("station: journal: %w: %q is no page of it", panel.ErrQuery, f.Page)
		}
	}
	if f.Limit < 1 || f.Limit > wire.MaxPage {
		f.Limit = wire.MaxPage
	}
	keep := func(e *ledger.Entry) bool {
		w := wireEntry(e, false)
		return f.Keeps(&w)
	}
	for range scansPerPage {
		es, next, more, err := l.Entries(at, !f.Oldest, f.Limit-len(p.Entries), keep)
		if err != nil && p.Unread == "" {
			p.Unread = err.Error() // single records: the others are here
		}
		for i := range es {
			p.Entries = append(p.Entries, wireEntry(&es[i], f.Details))
		}
		if at = next; !more {
			return p, nil
		}
		if len(p.Entries) == f.Limit {
			break
		}
	}
	p.Next = fmt.Sprintf("%d.%d", at.Transition, at.Act)
	return p, nil
}

func wireEntry(e *ledger.Entry, details bool) wire.Entry {
	if e.Act != nil {
		return wire.ActEntry(e.Act)
	}
	w := wire.FromJournal(e.Transition)
	if !details {
		w.Detail = nil
	}
	return w
}

// Alarms gives every alarm point as it was shown last.
func (s *Station) Alarms() wire.Alarms {
	s.desk.mu.Lock()
	defer s.desk.mu.Unlock()
	return s.desk.points
}

// look renews what Alarms gives; desk.mu is held. Compute goroutine.
func (s *Station) look() {
	a := s.line.Alarms()
	out := wire.Alarms{Version: 1, Skid: s.sk.ID, Flood: a.Flood(), Points: []wire.Point{}, Caution: wire.Caution}
	for _, p := range a.Points() {
		out.Points = append(out.Points, wire.FromState(&p))
	}
	s.desk.points = out
}
