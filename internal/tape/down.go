package tape

import (
	"errors"
	"io/fs"
	"path/filepath"
	"syscall"

	"lapwing/internal/tape/boltfile"
)

// DiskRefused tells whether Open failed because of the disk: full, read-only, broken, or no permission. The caller can
// then do without the tape; any other error is a mistake that somebody must mend first.
func DiskRefused(err error) bool {
	for _, e := range []error{fs.ErrPermission, syscall.ENOSPC, syscall.EROFS, syscall.EDQUOT, syscall.EIO, syscall.EFBIG, boltfile.ErrRoom} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}

// Down is a tape that keeps nothing, for a program that goes on without one: it holds no file, every sample is refused and
// counted, every wish fails with ErrClosed, and Stats says why.
func Down(path string, opt Options, why error) *Tape {
	t := &Tape{opt: opt, hash: SkidHash(opt.Skid), done: make(chan struct{}), queue: newQueue(1), clip: make(map[string]*Clip)}
	if t.opt.ClipsPath == "" {
		t.opt.ClipsPath = filepath.Join(filepath.Dir(path), "clips.db")
	}
	t.ring, t.clips = &store{path: path}, &store{path: t.opt.ClipsPath}
	t.health.down = why
	t.queue.close()
	close(t.done)
	return t
}
