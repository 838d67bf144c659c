package tape

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"

	bolt "go.etcd.io/bbolt"
)

// A clip may begin with a state: what the analysis knew at its first sample, as bytes that mean nothing to the tape. It
// lies in a sub-bucket of its own, for the reason that segments do.
//
//	states   run, 4 bytes BE, and sample, 8 bytes BE  ->  a sub-bucket: "state" -> CRC32C, then the bytes
var (
	stateBucket = []byte("states")
	stateKey    = []byte("state")
)

// ErrNoState says that a clip has no state at its beginning.
var ErrNoState = errors.New("no state at its beginning")

type stateAt struct {
	run  uint32
	from int64
}

func (a stateAt) key() []byte {
	return binary.BigEndian.AppendUint64(binary.BigEndian.AppendUint32(nil, a.run), uint64(a.from))
}

// stateCost is what a state takes in the file, reckoned high.
func stateCost(n int) int64 { return int64(n) + 3*4096 }

// State gives the bytes that the clip was protected with.
func (t *Tape) State(id string) ([]byte, error) {
	c, err := t.Clip(id)
	if err != nil {
		return nil, err
	}
	var out []byte
	err = t.clips.view(func(tx *bolt.Tx) error {
		b := tx.Bucket(stateBucket)
		if b == nil {
			return ErrNoState
		}
		if b = b.Bucket(stateAt{c.Run, c.From}.key()); b == nil {
			return ErrNoState
		}
		rec := b.Get(stateKey)
		if len(rec) < 4 || crc32.Checksum(rec[4:], castagnoli) != binary.BigEndian.Uint32(rec) {
			return errors.New("its state is damaged")
		}
		out = append([]byte(nil), rec[4:]...)
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("tape: clip %s: %w", id, err)
	}
	return out, nil
}

// putState writes a state.
func putState(tx *bolt.Tx, at stateAt, state []byte) error {
	all, err := tx.CreateBucketIfNotExists(stateBucket)
	if err != nil {
		return err
	}
	if all.Bucket(at.key()) != nil {
		return nil
	}
	b, err := all.CreateBucket(at.key())
	if err != nil {
		return err
	}
	return b.Put(stateKey, append(binary.BigEndian.AppendUint32(nil, crc32.Checksum(state, castagnoli)), state...))
}

// dropStates removes those that no clip begins with, and gives what the rest takes.
func dropStates(tx *bolt.Tx, wanted func(stateAt) bool) (bytes int64, err error) {
	all := tx.Bucket(stateBucket)
	if all == nil {
		return 0, nil
	}
	var gone [][]byte
	err = all.ForEachBucket(func(k []byte) error {
		if len(k) != 12 {
			return fmt.Errorf("a state's key has %d bytes", len(k))
		}
		if !wanted(stateAt{binary.BigEndian.Uint32(k), int64(binary.BigEndian.Uint64(k[4:]))}) {
			gone = append(gone, append([]byte(nil), k...))
			return nil
		}
		bytes += stateCost(len(all.Bucket(k).Get(stateKey)))
		return nil
	})
	for _, k := range gone {
		err = errors.Join(err, all.DeleteBucket(k))
	}
	return bytes, err
}

// tidyStates drops what no clip wants any more within tx; now is the set of clips as it will be. The second value is to be
// called when tx is on disk.
func (t *Tape) tidyStates(tx *bolt.Tx, now func(func(*Clip))) (done func(), err error) {
	bytes, err := dropStates(tx, func(at stateAt) (wanted bool) {
		now(func(c *Clip) { wanted = wanted || c.Run == at.run && c.From == at.from })
		return wanted
	})
	return func() {
		t.clips.mu.Lock()
		defer t.clips.mu.Unlock()
		t.clips.live += bytes - t.clips.states
		t.clips.states = bytes
	}, err
}
