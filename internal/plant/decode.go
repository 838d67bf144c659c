package plant

import (
	"fmt"
	"math"

	"lapwing/internal/skid"
)

// decode takes a number out of registers as they came over the wire, one uint16 each, its first byte the high one. order
// says where the bytes of the number stand, a its highest: abcd as the standard has it, cdab with the low word first,
// badc with the bytes of each word exchanged, dcba with both. Numbers of four words follow the same rule. A float that is
// no number is an error: that is how devices mark a value they do not have.
func decode(kind, order string, words []uint16) (float64, error) {
	r := skid.Register{Type: kind}
	if len(words) != r.Words() {
		return math.NaN(), fmt.Errorf("plant: %d registers for a value of type %s", len(words), kind)
	}
	var bits uint64
	for i := range words {
		w := words[i]
		if order == "cdab" || order == "dcba" {
			w = words[len(words)-1-i]
		}
		if order == "badc" || order == "dcba" {
			w = w<<8 | w>>8
		}
		bits = bits<<16 | uint64(w)
	}
	v := 0.0
	switch kind {
	case "bool":
		if bits != 0 {
			v = 1
		}
	case "u16", "u32", "u64":
		v = float64(bits)
	case "i16":
		v = float64(int16(bits))
	case "i32":
		v = float64(int32(bits))
	case "f32":
		v = float64(math.Float32frombits(uint32(bits)))
	case "f64":
		v = math.Float64frombits(bits)
	default:
		return math.NaN(), fmt.Errorf("plant: no type %q", kind)
	}
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return math.NaN(), fmt.Errorf("plant: the device gives no number")
	}
	return v, nil
}

// value turns a tag's registers into SI, or says why it is not believed.
func value(t *skid.ModbusTag, sk *skid.Skid, words []uint16) (float64, error) {
	raw, err := decode(t.Type, t.Order, words)
	if err != nil {
		return math.NaN(), err
	}
	people := raw*t.Scale + t.Offset
	v := people*t.Factor + t.Shift
	if math.IsNaN(v) || v < t.Min || v > t.Max {
		return math.NaN(), fmt.Errorf("%.6g %s is outside %.6g to %.6g", people, t.Unit, (t.Min-t.Shift)/t.Factor, (t.Max-t.Shift)/t.Factor)
	}
	if t.What == skid.PlantLoadStep {
		if v != math.Trunc(v) {
			return math.NaN(), fmt.Errorf("%g is no code of a load step", v)
		}
		if _, ok := sk.FindStep(int(v)); !ok {
			return math.NaN(), fmt.Errorf("the skid file has no load step %g", v)
		}
	}
	return v, nil
}
