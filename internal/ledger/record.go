package ledger

import (
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"time"
)

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// ErrRecord is wrapped by errors of a single record that cannot be read.
var ErrRecord = errors.New("record")

// seal puts the body's CRC32C before it.
func seal(body []byte) []byte {
	rec := binary.BigEndian.AppendUint32(make([]byte, 0, 4+len(body)), crc32.Checksum(body, castagnoli))
	return append(rec, body...)
}

// unseal checks a record and gives its body, which aliases rec.
func unseal(rec []byte) ([]byte, error) {
	if len(rec) < 4 {
		return nil, fmt.Errorf("%w: %d bytes", ErrRecord, len(rec))
	}
	if got, want := crc32.Checksum(rec[4:], castagnoli), binary.BigEndian.Uint32(rec); got != want {
		return nil, fmt.Errorf("%w: checksum %08x, stored %08x", ErrRecord, got, want)
	}
	return rec[4:], nil
}

func sealJSON(v any) ([]byte, error) {
	body, err := json.Marshal(v)
	if err != nil {
		return nil, err
	}
	return seal(body), nil
}

func unsealJSON(rec []byte, v any) error {
	body, err := unseal(rec)
	if err != nil {
		return err
	}
	if err := json.Unmarshal(body, v); err != nil {
		return fmt.Errorf("%w: %w", ErrRecord, err)
	}
	return nil
}

// Class ranks messages. When the outbox is full, the least important class gives way first.
type Class uint8

// Classes, most important first.
const (
	Alarm   Class = 1 // alarm transitions
	State   Class = 2 // health, standing states
	Feature Class = 3 // condensed features
)

var classes = [...]Class{Alarm, State, Feature}

func (c Class) String() string {
	switch c {
	case Alarm:
		return "alarm"
	case State:
		return "state"
	case Feature:
		return "feature"
	}
	return fmt.Sprintf("class %d", uint8(c))
}

// Message is one message that has not been acknowledged.
type Message struct {
	ID      uint64 // rises by one for every message of any class, for ever
	Class   Class
	Topic   string
	Payload []byte
	Retain  bool
	Created time.Time
}

// encode lays a message out as flags, created (ns), topic length, topic, payload.
func (m *Message) encode() []byte {
	body := make([]byte, 0, 11+len(m.Topic)+len(m.Payload))
	var flags byte
	if m.Retain {
		flags = 1
	}
	body = append(body, flags)
	body = binary.BigEndian.AppendUint64(body, uint64(m.Created.UnixNano()))
	body = binary.BigEndian.AppendUint16(body, uint16(len(m.Topic)))
	return seal(append(append(body, m.Topic...), m.Payload...))
}

func decodeMessage(id uint64, c Class, rec []byte) (Message, error) {
	body, err := unseal(rec)
	if err != nil {
		return Message{}, err
	}
	if len(body) < 11 {
		return Message{}, fmt.Errorf("%w: message of %d bytes", ErrRecord, len(body))
	}
	topic := int(binary.BigEndian.Uint16(body[9:]))
	if body[0] > 1 || topic > len(body)-11 {
		return Message{}, fmt.Errorf("%w: message with flags %x and a topic of %d bytes", ErrRecord, body[0], topic)
	}
	return Message{
		ID: id, Class: c, Retain: body[0] == 1,
		Created: time.Unix(0, int64(binary.BigEndian.Uint64(body[1:]))).UTC(),
		Topic:   string(body[11 : 11+topic]),
		Payload: append([]byte{}, body[11+topic:]...),
	}, nil
}

func key(id uint64) []byte { return binary.BigEndian.AppendUint64(nil, id) }
