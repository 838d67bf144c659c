package boltfile

import (
	"errors"
	"os"

	bolt "go.etcd.io/bbolt"
	"golang.org/x/sys/unix"
)

// leaveFree is the share of the free space that a reservation does not touch: alarms, journal and the system need some.
const leaveFree = 16

// ErrRoom says that the disk has not the room that was to be reserved.
var ErrRoom = errors.New("not enough room on the disk")

// reserve takes the file's whole bound on the disk, so that a disk that others fill can no longer starve it, and so that
// a growing file never waits. File systems that cannot are left as they are: Allocated tells.
func reserve(path string, o Options) error {
	if !o.Reserve || o.MaxBytes <= 0 {
		return nil
	}
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	defer f.Close()
	have, err := allocated(f)
	if err != nil {
		return err
	}
	need := o.MaxBytes - have
	if need <= 0 {
		return nil
	}
	var fs unix.Statfs_t
	if err := unix.Fstatfs(int(f.Fd()), &fs); err != nil {
		return err
	}
	if free := int64(fs.Bavail) * fs.Bsize; need > free-free/leaveFree {
		return ErrRoom
	}
	err = unix.Fallocate(int(f.Fd()), 0, 0, o.MaxBytes)
	if errors.Is(err, unix.EOPNOTSUPP) || errors.Is(err, unix.ENOSYS) {
		return nil
	}
	if err != nil {
		return err
	}
	return f.Sync()
}

// withRoom sees to it that a file can grow by o.Room after the disk has become full. It opens it again where it had to
// enlarge it, since bbolt cuts a file that others enlarged. A disk that is full already gives none.
func withRoom(db *bolt.DB, path string, o Options) (*bolt.DB, error) {
	var used int64
	err := Guard(func() error {
		return db.View(func(tx *bolt.Tx) error { used = tx.Size(); return nil })
	})
	st, serr := os.Stat(path)
	if err = errors.Join(err, serr); err != nil {
		return nil, errors.Join(err, Guard(db.Close))
	}
	if st.Size() >= used+o.Room/2 && Allocated(path) >= used+o.Room/2 {
		return db, nil
	}
	if err := Guard(db.Close); err != nil {
		return nil, err
	}
	if f, err := os.OpenFile(path, os.O_RDWR, 0); err == nil {
		if unix.Fallocate(int(f.Fd()), 0, 0, used+o.Room) == nil {
			_ = f.Sync() // no promise is made
		}
		_ = f.Close()
	}
	return openChecked(path, o)
}

// allocated is how many bytes of the disk a file takes.
func allocated(f *os.File) (int64, error) {
	var st unix.Stat_t
	if err := unix.Fstat(int(f.Fd()), &st); err != nil {
		return 0, err
	}
	return st.Blocks * 512, nil
}

// Allocated is how many bytes of the disk the file at path takes; 0 when it cannot be told.
func Allocated(path string) int64 {
	f, err := os.Open(path)
	if err != nil {
		return 0
	}
	defer f.Close()
	n, err := allocated(f)
	if err != nil {
		return 0
	}
	return n
}
