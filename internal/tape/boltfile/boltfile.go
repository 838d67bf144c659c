// Package boltfile opens a bbolt file so that a damaged one never stops the program.
//
//	Needs: a path, and what kind and layout version the file must be.
//	Waits: at most Options.Timeout for the file lock; one process holds a file.
//	Emits: an open database, and a Damage when the file found was unusable and has been renamed beside a new one.
//	It gives an error, and touches nothing, when the file is held by another process, is of another kind, or
//	has a layout this program does not know and may not throw away.
//
// bbolt answers a damaged page with a panic and a page the disk cannot deliver with a fault signal; Guard turns both
// into errors. bbolt's data pages carry no checksum: every value stored through this package's users has its own.
package boltfile

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime/debug"
	"sort"
	"strings"
	"time"

	bolt "go.etcd.io/bbolt"
	berrors "go.etcd.io/bbolt/errors"
)

// Errors of Open that name a file which is in order, but not for us.
var (
	// ErrForeign: one of our files, but of another kind: two paths are mixed up. Never renamed.
	ErrForeign = errors.New("not a file of this kind")
	// ErrVersion: a layout this program does not know, in a file that may not be thrown away.
	ErrVersion = errors.New("layout version not known to this program")
	// ErrHeld: another process has the file open.
	ErrHeld = errors.New("file is held by another process")
)

// ErrDamaged is wrapped by every error that Guard made out of a panic or a memory fault.
var ErrDamaged = errors.New("damaged file")

var headBucket, headKey = []byte("head"), []byte("format")

// Options say what the file must be.
type Options struct {
	Kind       string               // stands in the file's head: "tape", "clips", "ledger"
	Version    int                  // layout version, >= 1
	MaxBytes   int64                // the file may not grow past this; 0: no bound
	Timeout    time.Duration        // for the file lock; 0: 2 s
	Disposable bool                 // unknown versions are moved aside too, and only the newest moved file is kept
	Reserve    bool                 // take MaxBytes on the disk at once, where it is free and the file system can
	Room       int64                // so many bytes beyond what is used are taken on the disk with every opening, where it has them
	NoSync     bool                 // for tests: a commit does not wait for the disk
	Walk       func(*bolt.Tx) error // first reading; an error or a panic means that the file is damaged; may be nil
}

// Damage tells what was wrong with a file and where it is now.
type Damage struct {
	Path    string // the file asked for; a new, empty one now stands there
	MovedTo string // the old one, untouched; empty when even renaming was not needed
	Reason  string
}

func (d *Damage) String() string {
	return fmt.Sprintf("%s was unusable (%s); it is kept as %s and a new file was begun", d.Path, d.Reason, d.MovedTo)
}

// Open opens or creates the file. A damaged file is renamed to <path>.corrupt-<unix nanoseconds>, a new one is begun
// in its place and the Damage says so; the error is then nil.
func Open(path string, o Options) (*bolt.DB, *Damage, error) {
	if o.Kind == "" || o.Version < 1 {
		return nil, nil, fmt.Errorf("boltfile: open %s: kind and version must be given", path)
	}
	if err := createIfAbsent(path, o); err != nil {
		return nil, nil, fmt.Errorf("boltfile: create %s: %w", path, err)
	}
	if err := reserve(path, o); err != nil {
		return nil, nil, fmt.Errorf("boltfile: reserve %s: %w", path, err)
	}
	db, err := openChecked(path, o)
	if err == nil && o.Room > 0 {
		db, err = withRoom(db, path, o)
	}
	if err == nil {
		return db, nil, nil
	}
	if !errors.Is(err, ErrDamaged) && (!errors.Is(err, ErrVersion) || !o.Disposable) {
		return nil, nil, fmt.Errorf("boltfile: open %s: %w", path, err)
	}
	d, moveErr := SetAside(path, err.Error(), o.Disposable)
	if moveErr != nil {
		return nil, nil, fmt.Errorf("boltfile: open %s: %w (and it could not be moved aside: %v)", path, err, moveErr)
	}
	if err := createIfAbsent(path, o); err != nil {
		return nil, d, fmt.Errorf("boltfile: create %s: %w", path, err)
	}
	if err := reserve(path, o); err != nil {
		return nil, d, fmt.Errorf("boltfile: reserve %s: %w", path, err)
	}
	if db, err = openChecked(path, o); err == nil && o.Room > 0 {
		db, err = withRoom(db, path, o)
	}
	if err != nil {
		return nil, d, fmt.Errorf("boltfile: open new %s: %w", path, err)
	}
	return db, d, nil
}

// SetAside renames a file to <path>.corrupt-<unix nanoseconds>. With onlyNewest, files set aside earlier are removed:
// a rolling buffer's corpses must not fill the disk.
func SetAside(path, reason string, onlyNewest bool) (*Damage, error) {
	if onlyNewest {
		for _, old := range Aside(path) {
			if err := os.Remove(old); err != nil {
				return nil, err
			}
		}
	}
	to := fmt.Sprintf("%s.corrupt-%d", path, time.Now().UnixNano())
	if err := os.Rename(path, to); err != nil {
		return nil, err
	}
	if err := syncDir(path); err != nil {
		return nil, err
	}
	return &Damage{Path: path, MovedTo: to, Reason: reason}, nil
}

// Aside lists the files set aside for path, oldest first.
func Aside(path string) []string {
	found, _ := filepath.Glob(path + ".corrupt-*") // the only error is a bad pattern
	sort.Strings(found)
	return found
}

// Guard runs f and turns a panic of bbolt, or a page that cannot be read, into an error that wraps ErrDamaged.
func Guard(f func() error) (err error) {
	old := debug.SetPanicOnFault(true)
	defer debug.SetPanicOnFault(old)
	defer func() {
		switch r := recover().(type) {
		case nil:
		case interface{ Addr() uintptr }: // a memory fault
			err = fmt.Errorf("%w: a page of it is not there or cannot be read", ErrDamaged)
		default:
			err = fmt.Errorf("%w: %v", ErrDamaged, r)
		}
	}()
	return f()
}

// createIfAbsent makes the file under another name, commits its head and renames it into place, so that a power cut
// during creation leaves either no file or a whole one.
func createIfAbsent(path string, o Options) error {
	if st, err := os.Stat(path); err == nil && st.Size() > 0 {
		return nil
	} else if err != nil && !errors.Is(err, os.ErrNotExist) {
		return err
	}
	fresh := path + ".new"
	if err := os.Remove(fresh); err != nil && !errors.Is(err, os.ErrNotExist) {
		return err
	}
	db, err := bolt.Open(fresh, 0o600, &bolt.Options{Timeout: lockWait(o), FreelistType: bolt.FreelistMapType})
	if err != nil {
		return err
	}
	err = db.Update(func(tx *bolt.Tx) error {
		b, err := tx.CreateBucket(headBucket)
		if err != nil {
			return err
		}
		return b.Put(headKey, head(o))
	})
	if closeErr := db.Close(); err == nil {
		err = closeErr
	}
	if err != nil {
		return err
	}
	if err := os.Rename(fresh, path); err != nil {
		return err
	}
	return syncDir(path)
}

func openChecked(path string, o Options) (*bolt.DB, error) {
	var db *bolt.DB
	err := Guard(func() error {
		var err error
		db, err = bolt.Open(path, 0o600, &bolt.Options{
			Timeout:         lockWait(o),
			FreelistType:    bolt.FreelistMapType,
			InitialMmapSize: mapSize(o.MaxBytes), // address space only; without it a growing file waits for every reader
			MaxSize:         int(o.MaxBytes),
		})
		return classify(err)
	})
	if err != nil {
		return nil, err
	}
	db.NoSync = o.NoSync
	if o.MaxBytes > 0 {
		// bbolt grows a file by AllocSize at a time and counts it against MaxSize.
		db.AllocSize = min(db.AllocSize, max(int(o.MaxBytes/64)&^4095, 16<<10))
	}
	err = Guard(func() error {
		return db.View(func(tx *bolt.Tx) error {
			if err := checkHead(tx, o); err != nil {
				return err
			}
			st, err := os.Stat(path)
			if err != nil {
				return err
			}
			if st.Size() < tx.Size() {
				return fmt.Errorf("%w: %d bytes long, its own count says %d", ErrDamaged, st.Size(), tx.Size())
			}
			if o.Walk == nil {
				return nil
			}
			if err := o.Walk(tx); err != nil {
				return fmt.Errorf("%w: %w", ErrDamaged, err)
			}
			return nil
		})
	})
	if err != nil {
		closeErr := Guard(db.Close)
		return nil, errors.Join(err, closeErr)
	}
	return db, nil
}

// classify separates a file that is broken from one that cannot be had.
func classify(err error) error {
	switch {
	case err == nil:
		return nil
	case errors.Is(err, berrors.ErrTimeout):
		return ErrHeld
	case errors.Is(err, berrors.ErrInvalid), errors.Is(err, berrors.ErrChecksum), errors.Is(err, berrors.ErrVersionMismatch),
		errors.Is(err, berrors.ErrInvalidMapping), strings.HasPrefix(err.Error(), "file size too small"): // bbolt has no value for this one
		return fmt.Errorf("%w: %w", ErrDamaged, err)
	}
	return err
}

func checkHead(tx *bolt.Tx, o Options) error {
	b := tx.Bucket(headBucket)
	if b == nil {
		return fmt.Errorf("%w: it has no head record", ErrDamaged)
	}
	got := b.Get(headKey)
	if bytes.Equal(got, head(o)) {
		return nil
	}
	if bytes.HasPrefix(got, []byte("lapwing "+o.Kind+" layout ")) {
		return fmt.Errorf("%w: the file says %q, this program reads %q", ErrVersion, got, head(o))
	}
	if bytes.HasPrefix(got, []byte("lapwing ")) {
		return fmt.Errorf("%w: the file says %q, wanted is %q", ErrForeign, got, head(o))
	}
	return fmt.Errorf("%w: its head record reads %q", ErrDamaged, got)
}

func head(o Options) []byte { return fmt.Appendf(nil, "lapwing %s layout %d", o.Kind, o.Version) }

func lockWait(o Options) time.Duration {
	if o.Timeout > 0 {
		return o.Timeout
	}
	return 2 * time.Second
}

// mapSize is the address space to reserve: the bound and a little, in whole 64 MiB.
func mapSize(bound int64) int {
	const step = 64 << 20
	return int((bound/step + 2) * step)
}

func syncDir(path string) error {
	d, err := os.Open(filepath.Dir(path))
	if err != nil {
		return err
	}
	err = d.Sync()
	return errors.Join(err, d.Close())
}
