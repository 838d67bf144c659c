package ledger

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"testing"
	"time"

	bolt "go.etcd.io/bbolt"
	"pgregory.net/rapid"

	"lapwing/internal/alarm"
	"lapwing/internal/tape/boltfile"
)

func TestMain(m *testing.M) {
	if path := os.Getenv("LAPWING_LEDGER_CHILD"); path != "" {
		commitForEver(path)
	}
	os.Exit(m.Run())
}

var noon = time.Date(2026, 3, 1, 12, 0, 0, 0, time.UTC)

func open(t testing.TB, path string, opt Options) *Ledger {
	t.Helper()
	opt.Now = func() time.Time { return noon }
	l, err := Open(path, opt)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = l.Close() })
	return l
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func transition(id uint64) alarm.Transition {
	return alarm.Transition{ID: id, Key: "t1.he.suction/leaking", From: alarm.Normal, To: alarm.Unacked, Severity: alarm.Alert,
		At: noon.Add(time.Duration(id) * time.Second), Turn: int64(id) * 10, Sentence: "suction group leaking",
		Detail: map[string]float64{"area_mm2": float64(id)}}
}

func TestOneEvaluationIsOneCommit(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state.db")
	l := open(t, path, Options{})
	type points struct{ Standing []string }
	must(t, l.Commit(func(tx *Tx) error {
		must(t, tx.Journal(transition(1)))
		must(t, tx.Journal(transition(3)))
		must(t, tx.AlarmSnapshot(points{[]string{"a"}}))
		_, err := tx.Enqueue(Alarm, "site/skid/alarm", []byte(`{"id":1}`), true)
		return err
	}))
	stop := errors.New("stop")
	err := l.Commit(func(tx *Tx) error {
		must(t, tx.Journal(transition(4)))
		must(t, tx.AlarmSnapshot(points{[]string{"a", "b"}}))
		_, err := tx.Enqueue(Alarm, "site/skid/alarm", []byte(`{"id":4}`), false)
		return errors.Join(err, stop)
	})
	if !errors.Is(err, stop) {
		t.Errorf("%v", err)
	}
	check := func(l *Ledger) {
		t.Helper()
		js, err := l.Journal(0, 100)
		must(t, err)
		if len(js) != 2 || js[0].ID != 1 || js[1].ID != 3 {
			t.Fatalf("journal %+v", js)
		}
		got, want := js[1], transition(3)
		if string(got.Detail.(json.RawMessage)) != `{"area_mm2":3}` {
			t.Errorf("detail %s", got.Detail)
		}
		got.Detail, want.Detail = nil, nil
		if got != want {
			t.Errorf("got %+v, want %+v", got, want)
		}
		var p points
		if ok, err := l.AlarmSnapshot(&p); !ok || err != nil || !slices.Equal(p.Standing, []string{"a"}) {
			t.Errorf("snapshot %v %v %v", p, ok, err)
		}
		ms, err := l.Next(0, 10)
		must(t, err)
		if len(ms) != 1 || ms[0].ID != 1 || !ms[0].Retain || ms[0].Topic != "site/skid/alarm" || string(ms[0].Payload) != `{"id":1}` ||
			!ms[0].Created.Equal(noon) || ms[0].Class != Alarm {
			t.Errorf("outbox %+v", ms)
		}
		if s := l.Stats(); s.Transitions != 2 || s.LastJournal != 3 || s.LastMessage != 1 || s.Waiting[Alarm] != 1 {
			t.Errorf("%+v", s)
		}
	}
	check(l)
	must(t, l.Close())
	l = open(t, path, Options{})
	check(l)
	for _, id := range []uint64{0, 1, 2, 3} {
		if err := l.Commit(func(tx *Tx) error { return tx.Journal(transition(id)) }); !errors.Is(err, ErrOrder) {
			t.Errorf("transition %d again: %v", id, err)
		}
	}
	js, err := l.Journal(2, 1)
	if err != nil || len(js) != 1 || js[0].ID != 3 {
		t.Errorf("from 2: %+v %v", js, err)
	}
}

func TestBaselinesAndDocuments(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state.db")
	l := open(t, path, Options{})
	for k := range 3 {
		v, err := l.PutBaseline(fmt.Sprint("learnt ", k), []float64{float64(k), 0.1})
		if err != nil || v != uint64(k+1) {
			t.Fatalf("version %d, %v", v, err)
		}
	}
	must(t, l.PutDoc("tracker", map[string]int{"n": 7}))
	must(t, l.Close())
	l = open(t, path, Options{})
	var got []float64
	for ask, want := range map[uint64]uint64{0: 3, 1: 1, 2: 2} {
		info, ok, err := l.Baseline(ask, &got)
		if err != nil || !ok || info.Version != want || got[0] != float64(want-1) || !info.Created.Equal(noon) {
			t.Errorf("asked %d: %+v %v %v %v", ask, info, got, ok, err)
		}
	}
	if _, ok, err := l.Baseline(9, &got); ok || err != nil {
		t.Errorf("version 9: %v %v", ok, err)
	}
	list, err := l.Baselines()
	if err != nil || len(list) != 3 || list[1].Note != "learnt 1" {
		t.Errorf("%+v %v", list, err)
	}
	var doc map[string]int
	if ok, err := l.Doc("tracker", &doc); !ok || err != nil || doc["n"] != 7 {
		t.Errorf("%v %v %v", doc, ok, err)
	}
	if ok, err := l.Doc("nothing", &doc); ok || err != nil {
		t.Errorf("%v %v", ok, err)
	}
	if names, err := l.Docs(); err != nil || !slices.Equal(names, []string{"tracker"}) {
		t.Errorf("%v %v", names, err)
	}
}

// The outbox against a plain slice: enqueue, acknowledge, re-open, a bound that is often reached.
func TestOutboxAgainstAPlainSlice(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		path := filepath.Join(t.TempDir(), "state.db")
		const bound = 8
		opt := Options{OutboxMax: bound, noSync: true}
		l := open(t, path, opt)
		type entry struct {
			id uint64
			c  Class
		}
		var model []entry
		dropped := map[Class]uint64{}
		var last uint64
		for range rapid.IntRange(1, 20).Draw(rt, "steps") {
			switch rapid.IntRange(0, 4).Draw(rt, "do") {
			case 0, 1, 2:
				cs := rapid.SliceOfN(rapid.SampledFrom(classes[:]), 1, 6).Draw(rt, "classes")
				must(t, l.Commit(func(tx *Tx) error {
					for _, c := range cs {
						id, err := tx.Enqueue(c, "t", []byte{byte(c)}, false)
						if err != nil || id != last+1 {
							rt.Fatalf("id %d after %d, %v", id, last, err)
						}
						last = id
						model = append(model, entry{id, c})
						if len(model) > bound {
							least := slices.MaxFunc(model, func(a, b entry) int { return int(a.c) - int(b.c) }).c
							i := slices.IndexFunc(model, func(e entry) bool { return e.c == least })
							model = slices.Delete(model, i, i+1)
							dropped[least]++
						}
					}
					return nil
				}))
			case 3:
				var ids []uint64
				for _, e := range model {
					if rapid.Bool().Draw(rt, "ack") {
						ids = append(ids, e.id)
					}
				}
				must(t, l.Ack(append(ids, 99999)))
				model = slices.DeleteFunc(model, func(e entry) bool { return slices.Contains(ids, e.id) })
			case 4:
				must(t, l.Close())
				l = open(t, path, opt)
			}
			after := rapid.Uint64Range(0, last+1).Draw(rt, "after")
			limit := rapid.IntRange(1, 10).Draw(rt, "limit")
			ms, err := l.Next(after, limit)
			must(t, err)
			want := slices.DeleteFunc(slices.Clone(model), func(e entry) bool { return e.id <= after })
			want = want[:min(limit, len(want))]
			if len(ms) != len(want) {
				rt.Fatalf("after %d: %d messages, want %d", after, len(ms), len(want))
			}
			for i, m := range ms {
				if m.ID != want[i].id || m.Class != want[i].c {
					rt.Fatalf("after %d: message %d is %d %v, want %+v", after, i, m.ID, m.Class, want[i])
				}
			}
			s := l.Stats()
			for _, c := range classes {
				n := len(slices.DeleteFunc(slices.Clone(model), func(e entry) bool { return e.c != c }))
				if s.Waiting[c] != n || s.Dropped[c] != dropped[c] {
					rt.Fatalf("%v: %d waiting, %d dropped; want %d, %d", c, s.Waiting[c], s.Dropped[c], n, dropped[c])
				}
				only, err := l.NextOf(c, 0, 100)
				must(t, err)
				if len(only) != n {
					rt.Fatalf("%v alone: %d, want %d", c, len(only), n)
				}
			}
			if s.LastMessage != last {
				rt.Fatalf("last message %d, want %d", s.LastMessage, last)
			}
		}
		must(t, l.Close())
	})
}

func TestJournalIsBounded(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state.db")
	l := open(t, path, Options{JournalMax: 10})
	must(t, l.Commit(func(tx *Tx) error {
		for id := uint64(1); id <= 25; id++ {
			if err := tx.Journal(transition(id)); err != nil {
				return err
			}
		}
		return nil
	}))
	must(t, l.Close())
	l = open(t, path, Options{JournalMax: 10})
	js, err := l.Journal(0, 100)
	if s := l.Stats(); err != nil || len(js) != 10 || js[0].ID != 16 || s.JournalGone != 15 || s.Transitions != 10 {
		t.Errorf("%d transitions from %d, %+v, %v", len(js), js[0].ID, s, err)
	}
}

// damage does something to a closed state file that holds transitions 1 to 5, a document and three messages.
func TestDamage(t *testing.T) {
	flip := func(t *testing.T, path, bucket string, at int) {
		db, err := bolt.Open(path, 0o600, nil)
		must(t, err)
		must(t, db.Update(func(tx *bolt.Tx) error {
			b := tx.Bucket([]byte(bucket))
			k, v := b.Cursor().First()
			v = append([]byte{}, v...)
			v[at] ^= 0x10
			return b.Put(append([]byte{}, k...), v)
		}))
		must(t, db.Close())
	}
	overwrite := func(t *testing.T, path string, at int64, b []byte) {
		f, err := os.OpenFile(path, os.O_RDWR, 0)
		must(t, err)
		_, err = f.WriteAt(b, at)
		must(t, errors.Join(err, f.Close()))
	}
	for name, c := range map[string]struct {
		do      func(t *testing.T, path string)
		apart   int  // records set apart
		renamed bool // whole file set aside
		refused error
	}{
		"untouched":                      {do: func(*testing.T, string) {}},
		"a bit in a transition":          {do: func(t *testing.T, p string) { flip(t, p, "journal", 20) }, apart: 1},
		"a bit in a checksum":            {do: func(t *testing.T, p string) { flip(t, p, "doc", 1) }, apart: 1},
		"a bit in a counter":             {do: func(t *testing.T, p string) { flip(t, p, "count", 4) }, apart: 1},
		"cut in the middle":              {do: func(t *testing.T, p string) { must(t, os.Truncate(p, 9000)) }, renamed: true},
		"cut to one page":                {do: func(t *testing.T, p string) { must(t, os.Truncate(p, 4096)) }, renamed: true},
		"both meta pages zeroed":         {do: func(t *testing.T, p string) { overwrite(t, p, 0, make([]byte, 8192)) }, renamed: true},
		"every page but the metas wiped": {do: wipe, renamed: true},
		"nothing but zeros":              {do: func(t *testing.T, p string) { must(t, os.WriteFile(p, make([]byte, 70000), 0o600)) }, renamed: true},
		"a later layout":                 {do: func(t *testing.T, p string) { head(t, p, "lapwing ledger layout 2") }, refused: boltfile.ErrVersion},
		"a tape in its place":            {do: func(t *testing.T, p string) { head(t, p, "lapwing tape layout 1") }, refused: boltfile.ErrForeign},
	} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "state.db")
			l := open(t, path, Options{})
			must(t, l.Commit(func(tx *Tx) error {
				for id := range uint64(5) {
					must(t, tx.Journal(transition(id+1)))
				}
				for _, c := range classes {
					if _, err := tx.Enqueue(c, "t", []byte("p"), false); err != nil {
						return err
					}
				}
				return tx.PutDoc("a", 1)
			}))
			must(t, l.Close())
			c.do(t, path)
			l, err := Open(path, Options{})
			if c.refused != nil {
				if !errors.Is(err, c.refused) {
					t.Errorf("opened with %v, want %v", err, c.refused)
				}
				if len(boltfile.Aside(path)) != 0 {
					t.Error("the file was moved")
				}
				return
			}
			must(t, err)
			defer func() { must(t, l.Close()) }()
			s := l.Stats()
			if len(s.BadRecords) != c.apart || (s.Damage != nil) != c.renamed {
				t.Errorf("apart %q, damage %v", s.BadRecords, s.Damage)
			}
			if c.renamed {
				if _, err := os.Stat(s.Damage.MovedTo); err != nil {
					t.Error(err)
				}
				t.Log(s.Damage)
			} else if s.LastMessage != 3 {
				t.Errorf("last message %d: an id could be given twice", s.LastMessage)
			}
			// Whatever was there, it goes on.
			must(t, l.Commit(func(tx *Tx) error { return tx.Journal(transition(100)) }))
			js, err := l.Journal(0, 100)
			must(t, err)
			want := 6
			if c.renamed {
				want = 1
			}
			if name == "a bit in a transition" {
				want = 5
			}
			if len(js) != want {
				t.Errorf("%d transitions, want %d", len(js), want)
			}
		})
	}
}

func wipe(t *testing.T, path string) {
	st, err := os.Stat(path)
	must(t, err)
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	must(t, err)
	_, err = f.WriteAt(make([]byte, st.Size()-8192), 8192)
	must(t, errors.Join(err, f.Close()))
}

func head(t *testing.T, path, text string) {
	db, err := bolt.Open(path, 0o600, nil)
	must(t, err)
	must(t, db.Update(func(tx *bolt.Tx) error { return tx.Bucket([]byte("head")).Put([]byte("format"), []byte(text)) }))
	must(t, db.Close())
}

func TestADamagedLedgerIsKeptForEver(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state.db")
	for k := range 3 {
		l := open(t, path, Options{})
		must(t, l.Close())
		must(t, os.Truncate(path, 5000))
		if got := len(boltfile.Aside(path)); got != k {
			t.Fatalf("%d files set aside, want %d", got, k)
		}
	}
}

func FuzzMessage(f *testing.F) {
	f.Add((&Message{Topic: "a/b", Payload: []byte("x"), Created: noon}).encode(), false)
	f.Add([]byte{}, true)
	f.Fuzz(func(t *testing.T, rec []byte, sealIt bool) {
		if sealIt {
			rec = seal(rec)
		}
		m, err := decodeMessage(1, Alarm, rec)
		if err == nil && !slices.Equal(m.encode(), rec) {
			t.Errorf("%x decodes to %+v, which is %x", rec, m, m.encode())
		}
	})
}
