package tape

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"

	"github.com/klauspost/compress/zstd"
	bolt "go.etcd.io/bbolt"
)

// SkidHash is how a skid file is named in segments and clips: the SHA-256 of its bytes in hexadecimal; empty for none.
func SkidHash(file []byte) string {
	if len(file) == 0 {
		return ""
	}
	sum := sha256.Sum256(file)
	return hex.EncodeToString(sum[:])
}

func putSkid(tx *bolt.Tx, file []byte) error {
	if len(file) == 0 {
		return nil
	}
	sum := sha256.Sum256(file)
	b := tx.Bucket(skidBucket)
	if b.Get(sum[:]) != nil {
		return nil
	}
	enc, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1))
	if err != nil {
		return err
	}
	return b.Put(sum[:], enc.EncodeAll(file, nil))
}

// skidFile gives the file with that hash, checked against it; nil when it is not in the store.
func (s *store) skidFile(hash string) ([]byte, error) {
	sum, err := hex.DecodeString(hash)
	if err != nil || len(sum) != sha256.Size {
		return nil, fmt.Errorf("skid hash %q", hash)
	}
	var stored []byte
	err = s.view(func(tx *bolt.Tx) error {
		if v := tx.Bucket(skidBucket).Get(sum); v != nil {
			stored = append([]byte{}, v...)
		}
		return nil
	})
	if err != nil || stored == nil {
		return nil, err
	}
	dec, err := newDecoder()
	if err != nil {
		return nil, err
	}
	defer dec.Close()
	file, err := dec.DecodeAll(stored, nil)
	if err != nil {
		return nil, fmt.Errorf("skid file %s: %w", hash[:12], err)
	}
	if SkidHash(file) != hash {
		return nil, fmt.Errorf("skid file %s: its bytes do not have that hash", hash[:12])
	}
	return file, nil
}

// dropSkids removes skid files that no segment or clip refers to any more.
func dropSkids(tx *bolt.Tx, segs []segInfo) error {
	used := make(map[[4]byte]bool)
	for _, g := range segs {
		used[g.skid] = true
	}
	var gone [][]byte
	b := tx.Bucket(skidBucket)
	err := b.ForEach(func(k, _ []byte) error {
		if len(k) < 4 || !used[[4]byte(k[:4])] {
			gone = append(gone, append([]byte{}, k...))
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, k := range gone {
		if err := b.Delete(k); err != nil {
			return err
		}
	}
	return nil
}
