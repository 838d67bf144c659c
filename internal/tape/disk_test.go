package tape

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"lapwing/internal/acq"
)

// smallDisk mounts a disk of so many bytes, which takes root.
func smallDisk(t *testing.T, bytes string) (dir string, remount func(flags uintptr)) {
	t.Helper()
	dir = t.TempDir()
	if err := unix.Mount("none", dir, "tmpfs", 0, "size="+bytes); err != nil {
		t.Skipf("no small disk to be had: mounting one says %v (it takes root)", err)
	}
	t.Cleanup(func() {
		if err := unix.Unmount(dir, unix.MNT_DETACH); err != nil {
			t.Error(err)
		}
	})
	return dir, func(flags uintptr) {
		if err := unix.Mount("none", dir, "tmpfs", unix.MS_REMOUNT|flags, "size="+bytes); err != nil {
			t.Fatal(err)
		}
	}
}

// A disk that others have filled: the ring stays smaller than its bound and rolls within what there is, the newest is
// always there, and when room comes back it grows again.
func TestARingOnAFullDiskIsShorter(t *testing.T) {
	dir, _ := smallDisk(t, "2m")
	opt := small()
	opt.Segment = 4 * time.Second
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		t.Fatal(err)
	}
	defer func() {
		if err := errors.Join(tp.Check(), tp.Close()); err != nil {
			t.Error(err)
		}
	}()
	ballast := filepath.Join(dir, "others")
	if err := os.WriteFile(ballast, make([]byte, 1536<<10), 0o600); err != nil {
		t.Fatal(err)
	}
	const second = 100_000 // 0.9 MB, twice what fits
	feed(tp, 0, second)
	_ = tp.Flush(t.Context()) // may have lost a segment: counted
	s := tp.Stats()
	if s.NewestSeq != second || s.OldestSeq == 0 || s.LostSamples > 2000 {
		t.Errorf("%d to %d there, %d lost; last error %v", s.OldestSeq, s.NewestSeq, s.LostSamples, s.LastError)
	}
	t.Logf("half a MB left: the newest %d samples are there, %d segments lost, %d commits refused", s.NewestSeq-s.OldestSeq, s.LostSegments, s.FailedCommits)
	if err := os.Remove(ballast); err != nil {
		t.Fatal(err)
	}
	feed(tp, second, 2*second)
	flush(t, tp)
	again := tp.Stats()
	if again.NewestSeq != 2*second || again.LostSegments != s.LostSegments || again.NewestSeq-again.OldestSeq < 2*(s.NewestSeq-s.OldestSeq) {
		t.Errorf("with room again: %d to %d, lost %d", again.OldestSeq, again.NewestSeq, again.LostSegments)
	}
	wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(again.OldestSeq, 2*second, f) }, again.OldestSeq, 2*second)
}

// What Open says of disks that refuse, and whether the daemon may go on without the tape.
func TestOpenOnADiskThatRefuses(t *testing.T) {
	opt := small()
	t.Run("read-only", func(t *testing.T) {
		dir, remount := smallDisk(t, "16m")
		path := filepath.Join(dir, "tape.db")
		tp, err := Open(path, opt)
		if err != nil {
			t.Fatal(err)
		}
		feed(tp, 0, 1000)
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
		remount(unix.MS_RDONLY)
		_, err = Open(path, opt)
		refused(t, err, syscall.EROFS, "read-only file system", path)
		remount(0)
		tp = open(t, dir, opt)
		wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(0, 1000, f) }, 0, 1000)
	})
	t.Run("full", func(t *testing.T) {
		dir, _ := smallDisk(t, "64k")
		if err := os.WriteFile(filepath.Join(dir, "others"), make([]byte, 60<<10), 0o600); err != nil {
			t.Fatal(err)
		}
		_, err := Open(filepath.Join(dir, "tape.db"), opt)
		refused(t, err, syscall.ENOSPC, "no space left", filepath.Join(dir, "tape.db"))
	})
	t.Run("permission lost", func(t *testing.T) {
		dir := t.TempDir()
		path := filepath.Join(dir, "tape.db")
		tp, err := Open(path, opt)
		if err != nil {
			t.Fatal(err)
		}
		if err := errors.Join(tp.Close(), os.Chmod(path, 0)); err != nil {
			t.Fatal(err)
		}
		asNobody(t, func() { _, err = Open(path, opt) })
		refused(t, err, fs.ErrPermission, "permission denied", path)
		if err := os.Chmod(path, 0o600); err != nil {
			t.Fatal(err)
		}
	})
	t.Run("not by the disk", func(t *testing.T) {
		dir := t.TempDir()
		tp := open(t, dir, opt)
		held := opt
		held.LockWait = 1
		if _, err := Open(filepath.Join(dir, "tape.db"), held); err == nil || DiskRefused(err) {
			t.Errorf("held by another process: %v", err)
		}
		feed(tp, 0, 1)
	})
}

// asNobody runs f with the file permissions of another user; root would be let in everywhere.
func asNobody(t *testing.T, f func()) {
	t.Helper()
	if os.Geteuid() != 0 {
		f()
		return
	}
	runtime.LockOSThread() // and not unlocked: the thread ends with the test's goroutine
	if _, err := unix.SetfsuidRetUid(65534); err != nil {
		t.Fatal(err)
	}
	f()
	if _, err := unix.SetfsuidRetUid(0); err != nil {
		t.Fatal(err)
	}
}

func refused(t *testing.T, err, want error, says, path string) {
	t.Helper()
	if !errors.Is(err, want) || !strings.Contains(err.Error(), says) || !strings.Contains(err.Error(), path) || !DiskRefused(err) {
		t.Errorf("%v (disk refused: %v) should be %v, say %q and name %s", err, DiskRefused(err), want, says, path)
	}
}

// A tape that could not be opened answers every call.
func TestDown(t *testing.T) {
	why := errors.New("no space left")
	tp := Down(filepath.Join(t.TempDir(), "tape.db"), small(), why)
	feed(tp, 0, 200)
	tp.Mark(Mark{Turn: 1})
	if s := tp.Stats(); s.Down != why || s.Refused != 4 || s.Segments != 0 {
		t.Errorf("%+v", s)
	}
	_, err := tp.Protect(Clip{From: 0, To: 10})
	for what, err := range map[string]error{"protect": err, "flush": tp.Flush(t.Context())} {
		if !errors.Is(err, ErrClosed) {
			t.Errorf("%s: %v", what, err)
		}
	}
	if _, err := tp.Turns(1, 2); err == nil {
		t.Error("turns found")
	}
	if tp.Check() == nil || len(tp.Clips()) != 0 || len(tp.Extents()) != 0 || tp.Read(0, 10, func(*acq.Block) error { return nil }) != nil {
		t.Error("it holds something")
	}
	if err := tp.Close(); err != nil {
		t.Error(err)
	}
}
