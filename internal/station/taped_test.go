package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	bolt "go.etcd.io/bbolt"
	"golang.org/x/sys/unix"

	"lapwing/internal/acq"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// smallDisk mounts a disk of so many bytes, which takes root.
func smallDisk(t *testing.T, bytes string) string {
	t.Helper()
	dir := t.TempDir()
	if err := unix.Mount("none", dir, "tmpfs", 0, "size="+bytes); err != nil {
		t.Skipf("no small disk to be had: mounting one says %v (it takes root)", err)
	}
	t.Cleanup(func() {
		if err := unix.Unmount(dir, unix.MNT_DETACH); err != nil {
			t.Error(err)
		}
	})
	return dir
}

// On a disk that has no byte left, or refuses the tape from the start, every transition is in the journal as it is
// elsewhere, and health says what is lost.
func TestTheTapeGivesWayTheAlarmsDoNot(t *testing.T) {
	r := recorded(t)
	play := func(state string, opened func(*Station)) (said []string, h wire.Health) {
		s, err := Open(Options{SkidFile: r.skid, State: state, Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Learn: takeLearn, Listen: "none", Log: slog.New(slog.NewTextHandler(io.Discard, nil))})
		if err != nil {
			t.Fatal(err)
		}
		opened(s)
		ctx, cancel := context.WithTimeout(t.Context(), 2*time.Minute)
		defer cancel()
		runErr := s.Run(ctx)
		journal, err := s.ledger.Journal(0, 1000)
		h = s.health(time.Time{})
		if err := errors.Join(runErr, err, s.Close()); err != nil {
			t.Error(err)
		}
		for i := range journal {
			said = append(said, fmt.Sprint(journal[i].ID, journal[i].Key, journal[i].To, journal[i].Sentence))
		}
		return said, h
	}
	want, h := play(t.TempDir(), func(*Station) {})
	if len(want) == 0 || len(h.Tape.Problems) > 0 {
		t.Fatalf("%d transitions, problems %q", len(want), h.Tape.Problems)
	}
	for name, c := range map[string]struct {
		state  func(t *testing.T) string
		opened func(*testing.T, *Station)
		says   string
	}{
		"others fill the disk while it runs": {
			func(t *testing.T) string { return smallDisk(t, "40m") },
			func(t *testing.T, s *Station) { takeTheRest(t, s.o.State) },
			"the disk refused"},
		"the tape lies on a read-only disk": {func(t *testing.T) string {
			state, disk := t.TempDir(), smallDisk(t, "40m")
			old, err := tape.Open(filepath.Join(disk, "tape.db"), tape.Options{Info: acq.Info{Rate: 1000, Channels: 1, Bits: 16}, MaxBytes: 16 << 20})
			if err == nil {
				err = errors.Join(old.Close(), unix.Mount("none", disk, "tmpfs", unix.MS_REMOUNT|unix.MS_RDONLY, ""), os.Symlink(filepath.Join(disk, "tape.db"), filepath.Join(state, "tape.db")))
			}
			if err != nil {
				t.Fatal(err)
			}
			return state
		}, func(*testing.T, *Station) {}, "raw samples are not kept"},
	} {
		t.Run(name, func(t *testing.T) {
			got, h := play(c.state(t), func(s *Station) { c.opened(t, s) })
			if !slices.Equal(got, want) {
				t.Errorf("journal\n%q\nelsewhere\n%q", got, want)
			}
			if p := strings.Join(h.Tape.Problems, "; "); !strings.Contains(p, c.says) || !slices.Contains(h.Trouble, h.Tape.Problems[0]) {
				t.Errorf("tape %q, trouble %q", h.Tape.Problems, h.Trouble)
			}
			t.Logf("%d transitions as elsewhere; health: %q", len(got), h.Trouble)
		})
	}
}

// takeTheRest takes what is left of a disk.
func takeTheRest(t *testing.T, dir string) {
	f, err := os.Create(filepath.Join(dir, "others"))
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range []int{1 << 16, 1 << 12, 1} {
		for err == nil {
			_, err = f.Write(make([]byte, n))
		}
		if !errors.Is(err, unix.ENOSPC) {
			t.Fatal(err)
		}
		err = nil
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
}

// Room that cannot be reserved is no reason not to start.
func TestReserveWithoutRoom(t *testing.T) {
	s := staffed(t)
	o := s.o
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	o.State, o.Reserve, o.Listen = smallDisk(t, "40m"), true, "none"
	s, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if h := s.health(time.Time{}); !slices.ContainsFunc(h.Trouble, func(x string) bool { return strings.Contains(x, "that the tape was to reserve") }) {
		t.Errorf("trouble %q", h.Trouble)
	}
}

// What a daemon says of files that it finds damaged, or that a later version has written.
func TestTapeFilesAmiss(t *testing.T) {
	first := staffed(t)
	o := first.o
	if err := first.Close(); err != nil {
		t.Fatal(err)
	}
	o.Listen = "none"
	for name, c := range map[string]struct {
		file, head string // the head's words; "": the file is rubbish
		says       string // in health, or in the error
		starts     bool
	}{
		"a damaged ring":          {"tape.db", "", "tape.db was unusable", true},
		"damaged clips":           {"clips.db", "", "clips.db was unusable", true},
		"a ring of a later day":   {"tape.db", "lapwing tape layout 2", "layout 2", true},
		"clips of a later day":    {"clips.db", "lapwing clips layout 9", "layout version not known to this program", false},
		"clips in the ring's way": {"tape.db", "lapwing clips layout 1", "not a file of this kind", false},
	} {
		t.Run(name, func(t *testing.T) {
			o.State = t.TempDir()
			path := filepath.Join(o.State, c.file)
			err := os.WriteFile(path, []byte(strings.Repeat("rubbish ", 8192)), 0o600)
			if c.head != "" {
				err = errors.Join(os.Remove(path), withHead(path, c.head))
			}
			if err != nil {
				t.Fatal(err)
			}
			s, err := Open(o)
			if !c.starts {
				if err == nil || !strings.Contains(err.Error(), c.says) || !strings.Contains(err.Error(), path) {
					t.Errorf("%v does not say %q of %s", err, c.says, path)
				}
				return
			}
			if err != nil {
				t.Fatal(err)
			}
			defer s.Close()
			if h := s.health(time.Time{}); !slices.ContainsFunc(h.Trouble, func(x string) bool { return strings.Contains(x, c.says) && strings.Contains(x, ".corrupt-") }) {
				t.Errorf("trouble %q", h.Trouble)
			}
		})
	}
}

// withHead makes a database that says what it is.
func withHead(path, head string) error {
	db, err := bolt.Open(path, 0o600, nil)
	if err != nil {
		return err
	}
	return errors.Join(db.Update(func(tx *bolt.Tx) error {
		b, err := tx.CreateBucket([]byte("head"))
		if err != nil {
			return err
		}
		return b.Put([]byte("format"), []byte(head))
	}), db.Close())
}
