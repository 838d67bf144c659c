package ledger

import (
	"encoding/binary"
	"errors"
	"fmt"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/alarm"
)

// Acts gives up to max orders of people with IDs from fromID on, in order. A record that cannot be read is left out and
// named in the error; the others are given all the same.
func (l *Ledger) Acts(fromID uint64, max int) ([]alarm.Act, error) {
	var out []alarm.Act
	err := l.view(func(tx *bolt.Tx) error {
		var errs []error
		cur := tx.Bucket(actBucket).Cursor()
		for k, v := cur.Seek(key(fromID)); k != nil && len(out) < max; k, v = cur.Next() {
			var a alarm.Act
			if err := unsealJSON(v, &a); err != nil {
				errs = append(errs, fmt.Errorf("act %d: %w", binary.BigEndian.Uint64(k), err))
				continue
			}
			out = append(out, a)
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, fmt.Errorf("ledger: acts: %w", err)
	}
	return out, nil
}
