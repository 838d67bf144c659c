package tape

import (
	"errors"
	"fmt"

	bolt "go.etcd.io/bbolt"
	berrors "go.etcd.io/bbolt/errors"

	"lapwing/internal/tape/boltfile"
)

func remove(tx *bolt.Tx, gone []segInfo) error {
	raw, idx := tx.Bucket(rawBucket), tx.Bucket(idxBucket)
	for _, g := range gone {
		key := bigEndian(g.key)
		if err := raw.DeleteBucket(key); err != nil && !errors.Is(err, berrors.ErrBucketNotFound) {
			return fmt.Errorf("delete segment %d: %w", g.key, err)
		}
		if err := idx.Delete(key); err != nil {
			return fmt.Errorf("delete segment %d: %w", g.key, err)
		}
	}
	return nil
}

func (p *packed) write(tx *bolt.Tx, skid []byte) error {
	key := bigEndian(p.info.key)
	seg, err := tx.Bucket(rawBucket).CreateBucket(key)
	if err != nil {
		return err
	}
	for c, rec := range p.chans {
		if err := seg.Put(channelKey(c), rec); err != nil {
			return err
		}
	}
	if err := seg.Put(metaKey, p.meta); err != nil {
		return err
	}
	if err := putSkid(tx, skid); err != nil {
		return err
	}
	return tx.Bucket(idxBucket).Put(key, p.info.encode())
}

// load copies a segment out of the file.
func (s *store) load(g segInfo) (*packed, error) {
	p := &packed{info: g}
	err := s.view(func(tx *bolt.Tx) error {
		seg := tx.Bucket(rawBucket).Bucket(bigEndian(g.key))
		if seg == nil {
			return errGone
		}
		return seg.ForEach(func(k, v []byte) error {
			v = append([]byte(nil), v...)
			if string(k) == string(metaKey) {
				p.meta = v
				return nil
			}
			if string(k) != string(channelKey(len(p.chans))) {
				return fmt.Errorf("%w: key %x where channel %d was expected", boltfile.ErrDamaged, k, len(p.chans))
			}
			p.chans = append(p.chans, v)
			return nil
		})
	})
	if err != nil {
		return nil, fmt.Errorf("segment %d: %w", g.key, err)
	}
	return p, nil
}

// meta reads a segment's description alone.
func (s *store) meta(g segInfo) (rec []byte, err error) {
	err = s.view(func(tx *bolt.Tx) error {
		seg := tx.Bucket(rawBucket).Bucket(bigEndian(g.key))
		if seg == nil {
			return errGone
		}
		rec = append([]byte(nil), seg.Get(metaKey)...)
		return nil
	})
	return rec, err
}
