package ledger

import (
	"errors"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/alarm"
)

func (e Entry) name() string {
	if e.Act != nil {
		return fmt.Sprintf("a%d", e.Act.ID)
	}
	return fmt.Sprintf("t%d", e.Transition.ID)
}

// However the pages are cut and whichever way it is read, the journal gives every entry once, acts where they were done.
func TestEntriesInOrder(t *testing.T) {
	l := open(t, filepath.Join(t.TempDir(), "state.db"), Options{})
	defer l.Close()
	var want []string
	var tr, act uint64
	for i, kind := range "aattaatatttaaat" {
		must(t, l.Commit(func(tx *Tx) error {
			if kind == 'a' {
				act++
				want = append(want, fmt.Sprintf("a%d", act))
				return tx.Act(alarm.Act{ID: act, After: tr, Verb: "reset", By: "A", Said: "x"})
			}
			tr += uint64(1 + i%2) // ids of a journal that lost some
			want = append(want, fmt.Sprintf("t%d", tr))
			return tx.Journal(transition(tr))
		}))
	}
	read := func(from Place, back bool, page int, keep func(*Entry) bool) (got []string) {
		for range 100 {
			es, next, more, err := l.Entries(from, back, page, keep)
			must(t, err)
			if len(es) > page {
				t.Fatalf("%d entries on a page of %d", len(es), page)
			}
			for _, e := range es {
				got = append(got, e.name())
			}
			if from = next; !more {
				return got
			}
		}
		t.Fatal("no end")
		return nil
	}
	backwards := slices.Clone(want)
	slices.Reverse(backwards)
	rapid.Check(t, func(rt *rapid.T) {
		page := rapid.IntRange(1, 20).Draw(rt, "page")
		if got := read(Place{}, false, page, nil); !slices.Equal(got, want) {
			rt.Fatalf("pages of %d: %v, want %v", page, got, want)
		}
		if got := read(End, true, page, nil); !slices.Equal(got, backwards) {
			rt.Fatalf("back in pages of %d: %v, want %v", page, got, backwards)
		}
		acts := func(e *Entry) bool { return e.Act != nil }
		if got := read(End, true, page, acts); len(got) != int(act) || got[0] != fmt.Sprintf("a%d", act) {
			rt.Fatalf("acts only: %v", got)
		}
		// turning round at any place gives what was read, the other way round
		es, at, _, err := l.Entries(Place{}, false, page, nil)
		must(t, err)
		back := read(at, true, 3, nil)
		if len(back) != len(es) || back[0] != es[len(es)-1].name() {
			rt.Fatalf("turned after %d: %v", len(es), back)
		}
	})
}

func TestActsAreKept(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state.db")
	l := open(t, path, Options{JournalMax: 3})
	for id := uint64(1); id <= 5; id++ {
		must(t, l.Commit(func(tx *Tx) error { return tx.Act(alarm.Act{ID: id, Verb: "reset", By: "A"}) }))
	}
	if err := l.Commit(func(tx *Tx) error { return tx.Act(alarm.Act{ID: 5}) }); !errors.Is(err, ErrOrder) {
		t.Errorf("the same act twice: %v", err)
	}
	must(t, l.Close())
	l = open(t, path, Options{JournalMax: 3})
	defer l.Close()
	s := l.Stats()
	acts, err := l.Acts(0, 9)
	if err != nil || len(acts) != 3 || acts[0].ID != 3 || s.Acts != 3 || s.LastAct != 5 || s.ActsGone != 2 {
		t.Errorf("%+v, %+v, %v", acts, s, err)
	}
}

// A record that cannot be read costs itself only.
func TestEntriesPassOverWhatCannotBeRead(t *testing.T) {
	l := open(t, filepath.Join(t.TempDir(), "state.db"), Options{})
	defer l.Close()
	must(t, l.Commit(func(tx *Tx) error {
		for id := uint64(1); id <= 3; id++ {
			if err := errors.Join(tx.Journal(transition(id)), tx.Act(alarm.Act{ID: id, After: id})); err != nil {
				return err
			}
		}
		return errors.Join(tx.tx.Bucket(journalBucket).Put(key(2), []byte("no record")), tx.tx.Bucket(actBucket).Put(key(1), []byte("none either")))
	}))
	for _, back := range []bool{false, true} {
		from := Place{}
		if back {
			from = End
		}
		es, _, more, err := l.Entries(from, back, 9, nil)
		if len(es) != 4 || more || err == nil || !strings.Contains(err.Error(), "transition 2") || !strings.Contains(err.Error(), "act 1") {
			t.Errorf("back %v: %d entries, %v", back, len(es), err)
		}
	}
}
