package tape

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

// edit changes one value of a closed file the way a bad disk would: the value only, not the tree.
func edit(t *testing.T, path string, change func(tx *bolt.Tx) error) {
	t.Helper()
	db, err := bolt.Open(path, 0o600, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(db.Update(change), db.Close()); err != nil {
		t.Fatal(err)
	}
}

func flipIn(key []byte, at int) func(*bolt.Tx) error {
	return func(tx *bolt.Tx) error {
		seg := tx.Bucket(rawBucket).Bucket(bigEndian(3))
		v := slices.Clone(seg.Get(key))
		v[at] ^= 1
		return seg.Put(key, v)
	}
}

func overwrite(t *testing.T, path string, at int64, b []byte) {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	_, err = f.WriteAt(b, at)
	if err := errors.Join(err, f.Close()); err != nil {
		t.Fatal(err)
	}
}

// A tape of five segments of 200 samples is damaged while closed; then it is opened, read and written to.
func TestDamage(t *testing.T) {
	for name, c := range map[string]struct {
		do      func(t *testing.T, path string)
		lost    [2]int64 // samples that cannot be read; {0, 1000} with renamed
		renamed bool
		says    string
	}{
		"untouched":               {do: func(*testing.T, string) {}},
		"a bit in the counts":     {do: func(t *testing.T, p string) { edit(t, p, flipIn(channelKey(1), 99)) }, lost: [2]int64{400, 600}, says: "checksum"},
		"a bit in a header":       {do: func(t *testing.T, p string) { edit(t, p, flipIn(channelKey(2), 8)) }, lost: [2]int64{400, 600}, says: "checksum"},
		"a record of a later day": {do: func(t *testing.T, p string) { edit(t, p, flipIn(channelKey(0), 0)) }, lost: [2]int64{400, 600}, says: "layout 0"},
		"a bit in a description":  {do: func(t *testing.T, p string) { edit(t, p, flipIn(metaKey, 12)) }, lost: [2]int64{400, 600}, says: "checksum"},
		"a channel gone": {do: func(t *testing.T, p string) {
			edit(t, p, func(tx *bolt.Tx) error { return tx.Bucket(rawBucket).Bucket(bigEndian(3)).Delete(channelKey(2)) })
		}, lost: [2]int64{400, 600}, says: "disagree"},
		"a segment gone": {do: func(t *testing.T, p string) {
			edit(t, p, func(tx *bolt.Tx) error { return tx.Bucket(rawBucket).DeleteBucket(bigEndian(3)) })
		}, lost: [2]int64{0, 1000}, renamed: true, says: "in the index only"},
		"a bit in the index": {do: func(t *testing.T, p string) {
			edit(t, p, func(tx *bolt.Tx) error {
				v := slices.Clone(tx.Bucket(idxBucket).Get(bigEndian(2)))
				v[9] ^= 4
				return tx.Bucket(idxBucket).Put(bigEndian(2), v)
			})
		}, lost: [2]int64{0, 1000}, renamed: true, says: "idx record 2"},
		"cut in the middle": {do: func(t *testing.T, p string) {
			if err := os.Truncate(p, 20<<10); err != nil {
				t.Fatal(err)
			}
		}, lost: [2]int64{0, 1000}, renamed: true},
		"cut to nothing useful": {do: func(t *testing.T, p string) {
			if err := os.Truncate(p, 100); err != nil {
				t.Fatal(err)
			}
		}, lost: [2]int64{0, 1000}, renamed: true},
		"both meta pages zeroed": {do: func(t *testing.T, p string) { overwrite(t, p, 0, make([]byte, 8192)) },
			lost: [2]int64{0, 1000}, renamed: true, says: "invalid"},
		"all pages but the metas zeroed": {do: func(t *testing.T, p string) { overwrite(t, p, 8192, make([]byte, fileSize(p)-8192)) },
			lost: [2]int64{0, 1000}, renamed: true},
		"a later layout": {do: func(t *testing.T, p string) {
			edit(t, p, func(tx *bolt.Tx) error {
				return tx.Bucket([]byte("head")).Put([]byte("format"), []byte("lapwing tape layout 2"))
			})
		}, lost: [2]int64{0, 1000}, renamed: true, says: `the file says "lapwing tape layout 2"`},
	} {
		t.Run(name, func(t *testing.T) {
			dir, opt := t.TempDir(), small()
			path := filepath.Join(dir, "tape.db")
			tp, err := Open(path, opt)
			if err != nil {
				t.Fatal(err)
			}
			feed(tp, 0, 1000)
			if err := tp.Close(); err != nil {
				t.Fatal(err)
			}
			c.do(t, path)
			if tp, err = Open(path, opt); err != nil {
				t.Fatal(err)
			}
			defer func() {
				if err := tp.Close(); err != nil {
					t.Error(err)
				}
			}()
			if d := tp.Stats().Damage; (len(d) > 0) != c.renamed || c.renamed && !strings.Contains(d[0].Reason, c.says) {
				t.Errorf("damage %v", d)
			}
			feed(tp, 1000, 1600)
			flush(t, tp)
			var got []sample
			err = tp.Read(0, 1600, collect(&got))
			var damage *DamageError
			if broken := c.lost[1] > 0 && !c.renamed; errors.As(err, &damage) != broken || !broken && err != nil {
				t.Errorf("read: %v", err)
			} else if broken && !strings.Contains(err.Error(), c.says) {
				t.Errorf("read: %v does not say %q", err, c.says)
			}
			var want []sample
			for seq := int64(0); seq < 1600; seq++ {
				if seq < c.lost[0] || seq >= c.lost[1] {
					want = append(want, samplesOf(block(seq, 1, 3))...)
				}
			}
			if c.lost[1] > 0 && !c.renamed {
				want[c.lost[0]].lost = c.lost[1] - c.lost[0]
			}
			if d := diff(got, want); d != "" {
				t.Error(d)
			}
		})
	}
}

func TestOneMetaPageGoneCostsOneCommit(t *testing.T) {
	dir, opt := t.TempDir(), small()
	path := filepath.Join(dir, "tape.db")
	for page := range int64(2) {
		tp := open(t, dir, opt)
		for at := page * 1000; at < page*1000+1000; at += 200 { // a commit each
			feed(tp, at, at+200)
			flush(t, tp)
		}
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
		overwrite(t, path, page*4096, make([]byte, 4096))
		tp = open(t, dir, opt)
		if s := tp.Stats(); len(s.Damage) != 0 || s.NewestSeq < page*1000+800 {
			t.Errorf("page %d: newest %d, %v", page, s.NewestSeq, s.Damage)
		}
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
	}
}

func TestOnlyTheNewestDamagedRingIsKept(t *testing.T) {
	dir, opt := t.TempDir(), small()
	path := filepath.Join(dir, "tape.db")
	for range 3 {
		tp, err := Open(path, opt)
		if err != nil {
			t.Fatal(err)
		}
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
		overwrite(t, path, 0, make([]byte, 8192))
	}
	open(t, dir, opt)
	if got := boltfile.Aside(path); len(got) != 1 {
		t.Errorf("%v", got)
	}
}

func TestClipsOfALaterLayoutAreNotTouched(t *testing.T) {
	dir, opt := t.TempDir(), small()
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}
	edit(t, filepath.Join(dir, "clips.db"), func(tx *bolt.Tx) error {
		return tx.Bucket([]byte("head")).Put([]byte("format"), []byte("lapwing clips layout 9"))
	})
	if _, err := Open(filepath.Join(dir, "tape.db"), opt); !errors.Is(err, boltfile.ErrVersion) {
		t.Errorf("%v", err)
	}
	opt.ClipsPath = filepath.Join(dir, "other.db")
	open(t, dir, opt) // the ring is free again
	opt.ClipsPath = filepath.Join(dir, "tape.db")
	if _, err := Open(filepath.Join(dir, "tape.db"), opt); err == nil {
		t.Error("one file for both")
	}
}

// A ring that turns out damaged while running is set aside and begun anew; clips and sampling go on.
func TestARingDamagedWhileRunning(t *testing.T) {
	opt := small()
	hit := false
	opt.disk = func(kind string) error {
		if hit && kind == "tape" {
			hit = false
			panic("page 17: not a leaf") // as bbolt does
		}
		return nil
	}
	dir := t.TempDir()
	tp := open(t, dir, opt)
	feed(tp, 0, 1000)
	protect(t, tp, Clip{ID: "a", From: 200, To: 1400})
	flush(t, tp)
	hit = true // the writer is idle: nothing reads this meanwhile
	feed(tp, 1000, 2000)
	flush(t, tp)
	s := tp.Stats()
	if len(s.Damage) != 1 || !strings.Contains(s.Damage[0].Reason, "page 17") || s.OldestSeq != 1000 || s.NewestSeq != 2000 || s.LostSamples != 0 {
		t.Errorf("%+v", s)
	}
	wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(0, 5000, f) }, 1000, 2000)
	if c := clip(t, tp, "a"); !c.Complete || c.Have != 1200 {
		t.Errorf("%+v", c)
	}
	wantSamples(t, clipReader(tp, "a"), 200, 1400)
}

func FuzzMeta(f *testing.F) {
	m := &segMeta{Run: 1, N: 10, Rate: 1, Channels: 1, Events: []event{{Off: 2, N: 3, Lost: 4}}}
	rec, err := m.encode()
	if err != nil {
		f.Fatal(err)
	}
	f.Add(rec[4:])
	f.Add([]byte(`{"layout":1,"n":5,"channels":1,"rate":1,"events":[{"off":4,"n":9}]}`))
	f.Fuzz(func(t *testing.T, body []byte) {
		var raw rawJSON = body
		rec, err := sealed(raw)
		if err != nil {
			return
		}
		m, err := decodeMeta(rec)
		if err != nil {
			return
		}
		n := 0
		for _, s := range m.stretches() {
			if s.off != n || s.n < 1 {
				t.Fatalf("stretches %+v", m.stretches())
			}
			n += s.n
		}
		if n != m.N {
			t.Fatalf("stretches have %d samples, the segment %d", n, m.N)
		}
	})
}

// rawJSON goes through the encoder as it is.
type rawJSON []byte

func (r rawJSON) MarshalJSON() ([]byte, error) {
	if len(r) == 0 {
		return nil, fmt.Errorf("empty")
	}
	return r, nil
}
