package sparkplug

import (
	"errors"
	"fmt"
	"math"
	"time"
	"unicode/utf8"

	"google.golang.org/protobuf/encoding/protowire"
)

// Heard is a payload as it came. Of its metrics only what this package writes is read; other fields are passed over.
type Heard struct {
	At      time.Time // zero: none
	Seq     int       // -1: none
	Metrics []HeardMetric
}

// HeardMetric is a metric as it came.
type HeardMetric struct {
	Name       string
	Alias      uint64
	HasAlias   bool
	At         time.Time
	Type       Type // 0: not said
	Historical bool
	Null       bool
	Value      any // uint32, uint64, float32, float64, bool, string, []byte; nil: none, or of a kind that is not read
	Props      map[string]HeardProperty
}

// HeardProperty is a property as it came.
type HeardProperty struct {
	Type  Type
	Null  bool
	Value any
}

const maxMetrics = 100000 // of one payload

// Decode reads a payload. It never gives a part of one that is broken.
func Decode(b []byte) (*Heard, error) {
	h := &Heard{Seq: -1}
	err := fields(b, func(num protowire.Number, typ protowire.Type, u uint64, raw []byte) error {
		switch {
		case num == payloadTimestamp && typ == protowire.VarintType:
			h.At = fromMillis(u)
		case num == payloadSeq && typ == protowire.VarintType:
			if u > 255 {
				return fmt.Errorf("sequence number %d is over 255", u)
			}
			h.Seq = int(u)
		case num == payloadMetrics && typ == protowire.BytesType:
			if len(h.Metrics) >= maxMetrics {
				return fmt.Errorf("more than %d metrics", maxMetrics)
			}
			m, err := decodeMetric(raw)
			if err != nil {
				return fmt.Errorf("metric %d: %w", len(h.Metrics), err)
			}
			h.Metrics = append(h.Metrics, m)
		}
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("sparkplug: payload of %d bytes: %w", len(b), err)
	}
	return h, nil
}

func decodeMetric(b []byte) (m HeardMetric, err error) {
	err = fields(b, func(num protowire.Number, typ protowire.Type, u uint64, raw []byte) (err error) {
		varint := typ == protowire.VarintType
		switch {
		case num == metricName && typ == protowire.BytesType:
			m.Name, err = text(raw)
		case num == metricAlias && varint:
			m.Alias, m.HasAlias = u, true
		case num == metricTimestamp && varint:
			m.At = fromMillis(u)
		case num == metricDatatype && varint:
			m.Type = Type(uint32(u))
		case num == metricHistorical && varint:
			m.Historical = u != 0
		case num == metricNull && varint:
			m.Null = u != 0
		case num == metricProperties && typ == protowire.BytesType:
			m.Props, err = decodeSet(raw)
		default:
			if v, ok, verr := decodeValue(num, metricInt, typ, u, raw); ok || verr != nil {
				m.Value, err = v, verr
			}
		}
		return err
	})
	return m, err
}

func decodeSet(b []byte) (map[string]HeardProperty, error) {
	var keys []string
	var vals []HeardProperty
	err := fields(b, func(num protowire.Number, typ protowire.Type, _ uint64, raw []byte) error {
		switch {
		case num == setKeys && typ == protowire.BytesType:
			s, err := text(raw)
			keys = append(keys, s)
			return err
		case num == setValues && typ == protowire.BytesType:
			var p HeardProperty
			err := fields(raw, func(num protowire.Number, typ protowire.Type, u uint64, raw []byte) error {
				switch {
				case num == propertyType && typ == protowire.VarintType:
					p.Type = Type(uint32(u))
				case num == propertyNull && typ == protowire.VarintType:
					p.Null = u != 0
				default:
					if v, ok, err := decodeValue(num, propertyInt, typ, u, raw); ok || err != nil {
						p.Value = v
						return err
					}
				}
				return nil
			})
			vals = append(vals, p)
			return err
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	if len(keys) != len(vals) { // tck-id-payloads-propertyset-keys-array-size, -values-array-size
		return nil, fmt.Errorf("%d property keys, %d values", len(keys), len(vals))
	}
	out := make(map[string]HeardProperty, len(keys))
	for i, k := range keys {
		out[k] = vals[i]
	}
	return out, nil
}

// decodeValue reads one of the value fields that begin at first; ok is false for any other field.
func decodeValue(num, first protowire.Number, typ protowire.Type, u uint64, raw []byte) (v any, ok bool, err error) {
	switch k := num - first; {
	case k == 0 && typ == protowire.VarintType:
		return uint32(u), true, nil
	case k == 1 && typ == protowire.VarintType:
		return u, true, nil
	case k == 2 && typ == protowire.Fixed32Type:
		return math.Float32frombits(uint32(u)), true, nil
	case k == 3 && typ == protowire.Fixed64Type:
		return math.Float64frombits(u), true, nil
	case k == 4 && typ == protowire.VarintType:
		return u != 0, true, nil
	case k == 5 && typ == protowire.BytesType:
		s, err := text(raw)
		return s, err == nil, err
	case k == 6 && first == metricInt && typ == protowire.BytesType:
		return append([]byte(nil), raw...), true, nil
	}
	return nil, false, nil
}

// fields calls on with every field of a message.
func fields(b []byte, on func(num protowire.Number, typ protowire.Type, u uint64, raw []byte) error) error {
	for len(b) > 0 {
		num, typ, n := protowire.ConsumeTag(b)
		if n < 0 {
			return protowire.ParseError(n)
		}
		b = b[n:]
		var u uint64
		var raw []byte
		switch typ {
		case protowire.VarintType:
			u, n = protowire.ConsumeVarint(b)
		case protowire.Fixed32Type:
			var x uint32
			x, n = protowire.ConsumeFixed32(b)
			u = uint64(x)
		case protowire.Fixed64Type:
			u, n = protowire.ConsumeFixed64(b)
		case protowire.BytesType:
			raw, n = protowire.ConsumeBytes(b)
		default:
			n = protowire.ConsumeFieldValue(num, typ, b)
		}
		if n < 0 {
			return protowire.ParseError(n)
		}
		b = b[n:]
		if err := on(num, typ, u, raw); err != nil {
			return err
		}
	}
	return nil
}

func text(raw []byte) (string, error) {
	if !utf8.Valid(raw) {
		return "", errors.New("text that is not UTF-8")
	}
	return string(raw), nil
}

func fromMillis(u uint64) time.Time { return time.UnixMilli(int64(u)).UTC() }
