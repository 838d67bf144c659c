package sparkplug

import (
	"fmt"
	"math"
	"strings"
	"time"

	"google.golang.org/protobuf/encoding/protowire"
)

// Type is a Sparkplug data type (specification, section 6.4.16).
type Type uint32

// The data types in use here.
const (
	Int32    Type = 3
	Int64    Type = 4
	UInt64   Type = 8
	Double   Type = 10
	Boolean  Type = 11
	String   Type = 12
	DateTime Type = 13
)

// Metric is one value with its name. Value is an int32, int64, uint64, float64, bool, string or time.Time as Type says;
// nil is null: not known.
type Metric struct {
	Name       string
	Type       Type
	Value      any
	At         time.Time // UTC, when the value was true, and not when it was sent
	Historical bool      // it was so, and is not meant for the present value
	Props      []Property
}

// Property is a detail of a metric; Value as in Metric.
type Property struct {
	Key   string
	Type  Type
	Value any
}

// Field numbers of the payload's schema (specification, section 6.4.1).
const (
	payloadTimestamp = 1
	payloadMetrics   = 2
	payloadSeq       = 3

	metricName       = 1
	metricAlias      = 2
	metricTimestamp  = 3
	metricDatatype   = 4
	metricHistorical = 5
	metricNull       = 7
	metricProperties = 9
	metricInt        = 10 // then long, float, double, bool, string, bytes

	setKeys   = 1
	setValues = 2

	propertyType = 1
	propertyNull = 2
	propertyInt  = 3 // then long, float, double, bool, string
)

// millis is the time of Sparkplug: milliseconds since 1970 UTC.
func millis(t time.Time) uint64 {
	if t.IsZero() {
		return 0
	}
	return uint64(t.UnixMilli())
}

func appendVarint(b []byte, field protowire.Number, v uint64) []byte {
	return protowire.AppendVarint(protowire.AppendTag(b, field, protowire.VarintType), v)
}

func appendBytes(b []byte, field protowire.Number, v []byte) []byte {
	return protowire.AppendBytes(protowire.AppendTag(b, field, protowire.BytesType), v)
}

func appendString(b []byte, field protowire.Number, s string) []byte {
	return appendBytes(b, field, []byte(strings.ToValidUTF8(s, "\uFFFD")))
}

// appendValue writes a value into the fields that begin at first (int, long, float, double, bool, string); ok is false
// for one that is of another kind than its type says, or no number: it is written as null then.
func appendValue(b []byte, first protowire.Number, t Type, v any) (_ []byte, ok bool) {
	switch x := v.(type) {
	case int32:
		if t == Int32 {
			return appendVarint(b, first, uint64(uint32(x))), true
		}
	case int64:
		if t == Int64 {
			return appendVarint(b, first+1, uint64(x)), true
		}
	case uint64:
		if t == UInt64 {
			return appendVarint(b, first+1, x), true
		}
	case time.Time:
		if t == DateTime && !x.IsZero() {
			return appendVarint(b, first+1, millis(x)), true
		}
	case float64:
		if t == Double && !math.IsNaN(x) && !math.IsInf(x, 0) {
			return protowire.AppendFixed64(protowire.AppendTag(b, first+3, protowire.Fixed64Type), math.Float64bits(x)), true
		}
	case bool:
		if t == Boolean {
			return appendVarint(b, first+4, protowire.EncodeBool(x)), true
		}
	case string:
		if t == String {
			return appendString(b, first+5, x), true
		}
	}
	return b, false
}

// appendMetric writes a metric; an alias of 0 is none. A birth tells name and type, anything later the alias alone
// (tck-id-payloads-alias-birth-requirement, -alias-data-cmd-requirement, -metric-datatype-req, -metric-datatype-not-req).
func appendMetric(b []byte, m *Metric, alias uint64, birth bool) []byte {
	var e []byte
	if birth || alias == 0 {
		e = appendString(e, metricName, m.Name)
	}
	if alias != 0 {
		e = appendVarint(e, metricAlias, alias)
	}
	if !m.At.IsZero() {
		e = appendVarint(e, metricTimestamp, millis(m.At))
	}
	if birth {
		e = appendVarint(e, metricDatatype, uint64(m.Type))
	}
	if m.Historical {
		e = appendVarint(e, metricHistorical, 1)
	}
	var v []byte
	v, known := appendValue(v, metricInt, m.Type, m.Value)
	if !known {
		e = appendVarint(e, metricNull, 1)
	}
	if len(m.Props) > 0 {
		e = appendBytes(e, metricProperties, appendSet(nil, m.Props))
	}
	return appendBytes(b, payloadMetrics, append(e, v...))
}

func appendSet(b []byte, props []Property) []byte {
	for i := range props {
		b = appendString(b, setKeys, props[i].Key)
	}
	for i := range props {
		p := &props[i]
		e := appendVarint(nil, propertyType, uint64(p.Type))
		v, known := appendValue(nil, propertyInt, p.Type, p.Value)
		if !known {
			e = appendVarint(e, propertyNull, 1)
		}
		b = appendBytes(b, setValues, append(e, v...))
	}
	return b
}

// String names a type for messages.
func (t Type) String() string {
	switch t {
	case Int32:
		return "Int32"
	case Int64:
		return "Int64"
	case UInt64:
		return "UInt64"
	case Double:
		return "Double"
	case Boolean:
		return "Boolean"
	case String:
		return "String"
	case DateTime:
		return "DateTime"
	}
	return fmt.Sprintf("type %d", uint32(t))
}
