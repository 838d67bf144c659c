package plant

import (
	"encoding/binary"
	"math"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/skid"
)

// The bit patterns are those of IEEE 754 for π and of two's complement, as in any table of them; the orders of bytes are
// spelt out as they would be seen on the wire.
func TestDecodeEveryOrder(t *testing.T) {
	for _, c := range []struct {
		kind, order string
		wire        []byte
		want        float64
	}{
		{"u16", "abcd", []byte{0x12, 0x34}, 0x1234},
		{"u16", "cdab", []byte{0x12, 0x34}, 0x1234},
		{"u16", "badc", []byte{0x34, 0x12}, 0x1234},
		{"u16", "dcba", []byte{0x34, 0x12}, 0x1234},
		{"i16", "abcd", []byte{0xFF, 0xFE}, -2},
		{"i16", "badc", []byte{0xFE, 0xFF}, -2},
		{"u32", "abcd", []byte{0xFE, 0xDC, 0xBA, 0x98}, 0xFEDCBA98},
		{"u32", "cdab", []byte{0xBA, 0x98, 0xFE, 0xDC}, 0xFEDCBA98},
		{"u32", "badc", []byte{0xDC, 0xFE, 0x98, 0xBA}, 0xFEDCBA98},
		{"u32", "dcba", []byte{0x98, 0xBA, 0xDC, 0xFE}, 0xFEDCBA98},
		{"i32", "abcd", []byte{0xFF, 0xFF, 0xFF, 0xFE}, -2},
		{"i32", "cdab", []byte{0xFF, 0xFE, 0xFF, 0xFF}, -2},
		{"f32", "abcd", []byte{0x40, 0x49, 0x0F, 0xDB}, float64(float32(math.Pi))},
		{"f32", "cdab", []byte{0x0F, 0xDB, 0x40, 0x49}, float64(float32(math.Pi))},
		{"f32", "badc", []byte{0x49, 0x40, 0xDB, 0x0F}, float64(float32(math.Pi))},
		{"f32", "dcba", []byte{0xDB, 0x0F, 0x49, 0x40}, float64(float32(math.Pi))},
		{"u64", "abcd", []byte{0, 0, 0, 1, 0, 0, 0, 2}, 1<<32 + 2},
		{"u64", "cdab", []byte{0, 2, 0, 0, 0, 1, 0, 0}, 1<<32 + 2},
		{"f64", "abcd", []byte{0x40, 0x09, 0x21, 0xFB, 0x54, 0x44, 0x2D, 0x18}, math.Pi},
		{"f64", "cdab", []byte{0x2D, 0x18, 0x54, 0x44, 0x21, 0xFB, 0x40, 0x09}, math.Pi},
		{"f64", "badc", []byte{0x09, 0x40, 0xFB, 0x21, 0x44, 0x54, 0x18, 0x2D}, math.Pi},
		{"f64", "dcba", []byte{0x18, 0x2D, 0x44, 0x54, 0xFB, 0x21, 0x09, 0x40}, math.Pi},
		{"bool", "abcd", []byte{0, 1}, 1},
	} {
		got, err := decode(c.kind, c.order, words(c.wire))
		if err != nil || got != c.want {
			t.Errorf("%s %s of % x: %v, %v; want %v", c.kind, c.order, c.wire, got, err, c.want)
		}
	}
}

func words(wire []byte) (w []uint16) {
	for i := 0; i+1 < len(wire); i += 2 {
		w = append(w, binary.BigEndian.Uint16(wire[i:]))
	}
	return w
}

func TestWhatIsNoNumberIsRefused(t *testing.T) {
	for name, w := range map[string][]uint16{"quiet NaN": {0x7FC0, 0}, "signalling NaN": {0x7F80, 1}, "+Inf": {0x7F80, 0}, "-Inf": {0xFF80, 0}, "too short": {0x7F80}, "too long": {0, 0, 0}} {
		if v, err := decode("f32", "abcd", w); err == nil || !math.IsNaN(v) {
			t.Errorf("%s: %v, %v", name, v, err)
		}
	}
}

func FuzzDecode(f *testing.F) {
	for i, k := range []string{"bool", "u16", "i16", "u32", "i32", "u64", "f32", "f64"} {
		f.Add(byte(i), byte(i%4), []byte{0x7F, 0xC0, byte(i), 0, 0x40, 9, 0, 1}[:2*skid.Register{Type: k}.Words()])
	}
	f.Fuzz(func(t *testing.T, kind, order byte, wire []byte) {
		k := []string{"bool", "u16", "i16", "u32", "i32", "u64", "f32", "f64"}[kind%8]
		o := []string{"abcd", "cdab", "badc", "dcba"}[order%4]
		v, err := decode(k, o, words(wire))
		if (err == nil) == (math.IsNaN(v) || math.IsInf(v, 0)) {
			t.Fatalf("%s %s of % x: %v, %v", k, o, wire, v, err)
		}
		if err != nil {
			return
		}
		if k == "f64" || k == "u64" { // beyond 2^53 a float64 does not hold every whole number
			return
		}
		// What was decoded and written again as the standard has it decodes to the same.
		var b [4]byte
		switch k {
		case "f32":
			binary.BigEndian.PutUint32(b[:], math.Float32bits(float32(v)))
		case "u32", "i32":
			binary.BigEndian.PutUint32(b[:], uint32(int64(v)))
		default:
			binary.BigEndian.PutUint16(b[:], uint16(int32(v)))
		}
		again, err := decode(k, "abcd", words(b[:2*skid.Register{Type: k}.Words()]))
		if err != nil || again != v {
			t.Fatalf("%s %s of % x: %v, then %v (%v)", k, o, wire, v, again, err)
		}
	})
}

func TestRequestsCoverEveryTagWithinTheBounds(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := &skid.ModbusDevice{}
		for range rapid.IntRange(1, 60).Draw(t, "tags") {
			fn := rapid.IntRange(1, 4).Draw(t, "function")
			kind := "bool"
			if fn > 2 {
				kind = rapid.SampledFrom([]string{"u16", "f32", "f64"}).Draw(t, "type")
			}
			d.Tags = append(d.Tags, skid.ModbusTag{Register: skid.Register{Function: fn, Address: rapid.IntRange(0, 3000).Draw(t, "address"), Type: kind}})
		}
		seen := make([]int, len(d.Tags))
		for _, b := range plan(d) {
			most, gap := 125, gapRegisters
			if b.function <= 2 {
				most, gap = 2000, gapBits
			}
			if b.n > most || b.n < 1 {
				t.Fatalf("%d at once", b.n)
			}
			wanted := make([]bool, b.n)
			for _, k := range b.tags {
				tag := &d.Tags[k]
				seen[k]++
				if tag.Function != b.function || tag.Address < b.first || tag.Address+tag.Words() > b.first+b.n {
					t.Fatalf("tag %+v is not in %+v", tag.Register, b)
				}
				for i := range tag.Words() {
					wanted[tag.Address-b.first+i] = true
				}
			}
			hole := 0
			for _, w := range wanted {
				if hole++; w {
					hole = 0
				}
				if hole > gap {
					t.Fatalf("a hole of more than %d in %+v", gap, b)
				}
			}
		}
		for k, n := range seen {
			if n != 1 {
				t.Fatalf("tag %d is read %d times", k, n)
			}
		}
	})
}
