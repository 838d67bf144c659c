package still_test

import (
	"bytes"
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/still"
)

type knot struct {
	name  string
	next  *knot
	twin  *knot
	value float64
}

type constant struct{ table [4]float64 }

type machine struct {
	gain    float64
	counts  [3]int32
	hist    []float64
	view    []float64 // part of hist
	element *pair
	pairs   []pair
	empty   []int
	none    []int
	byName  map[string]*knot
	byStep  map[int][]float64
	at      time.Time
	first   *knot
	again   *knot // the same as first
	any     any
	apply   func(float64) float64
	fixed   *constant
	flags   []bool
	text    string
}

type pair struct {
	a float64
	s string
}

func built() *machine {
	m := &machine{apply: func(x float64) float64 { return 2 * x }, fixed: &constant{}, first: &knot{}, hist: make([]float64, 5)}
	return m
}

func lived(r func(int) float64) *machine {
	m := built()
	m.gain, m.counts, m.text = r(0), [3]int32{1, -2, 3}, "later"
	for i := range 9 {
		m.hist = append(m.hist, r(i))
	}
	m.view = m.hist[3:7]
	m.pairs = []pair{{r(1), "x"}, {r(2), ""}, {math.NaN(), "z"}}
	m.element = &m.pairs[1]
	m.empty, m.none = []int{}, nil
	k := &knot{name: "k", value: r(3)}
	k.next, k.twin = &knot{name: "next", twin: k}, k // a ring
	m.first, m.again = k, k
	m.byName = map[string]*knot{"k": k, "other": {name: "o"}}
	m.byStep = map[int][]float64{3: {1, 2}, -1: nil}
	m.at = time.Date(2031, 2, 3, 4, 5, 6, 7, time.UTC)
	m.any = map[string]any{"mm2": r(4), "list": []any{"a", true}}
	m.flags = []bool{true, false}
	return m
}

func take(t interface{ Fatal(...any) }, m *machine) []byte {
	b, err := still.Take(m, still.Rules{})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// All of a state comes back, with what shares memory sharing it again, and a fresh value's functions stay.
func TestStateComesBack(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		vals := rapid.SliceOfN(rapid.Float64(), 9, 9).Draw(rt, "values")
		a := lived(func(i int) float64 { return vals[i] })
		pic := take(rt, a)
		b := built()
		if rapid.Bool().Draw(rt, "used before") {
			b = lived(func(int) float64 { return 5 })
		}
		if err := still.Restore(b, pic, still.Rules{}); err != nil {
			rt.Fatal(err)
		}
		if !bytes.Equal(take(rt, b), pic) {
			rt.Fatal("a picture of the restored value is another one")
		}
		if b.apply == nil || b.apply(3) != 6 {
			rt.Fatal("the function is gone")
		}
		f, g := a.apply, b.apply
		a.apply, b.apply, a.pairs[2].a, b.pairs[2].a = nil, nil, 0, 0 // neither compares with itself
		if !reflect.DeepEqual(a, b) {
			rt.Fatalf("%+v\n%+v", a, b)
		}
		a.apply, b.apply = f, g
		if b.again != b.first || b.byName["k"] != b.first || b.first.next.twin != b.first || b.element != &b.pairs[1] {
			rt.Fatal("what was one thing is two")
		}
		if b.view[0] = 77; b.hist[3] != 77 {
			rt.Fatal("a part of a slice is no part of it any more")
		}
	})
}

// What is one in a fresh value and two in the picture does not overwrite itself.
func TestApartStaysApart(t *testing.T) {
	type two struct{ a, b *constant }
	type lists struct{ a, b []int }
	shared := &constant{}
	x, y := two{&constant{[4]float64{1}}, &constant{[4]float64{2}}}, two{shared, shared}
	pic, err := still.Take(&x, still.Rules{})
	if err != nil {
		t.Fatal(err)
	}
	if err := still.Restore(&y, pic, still.Rules{}); err != nil || y.a.table[0] != 1 || y.b.table[0] != 2 {
		t.Errorf("%v: %v %v", err, y.a, y.b)
	}
	one := []int{0, 0}
	p, q := lists{[]int{1, 2}, []int{3, 4}}, lists{one, one}
	if pic, err = still.Take(&p, still.Rules{}); err != nil {
		t.Fatal(err)
	}
	if err := still.Restore(&q, pic, still.Rules{}); err != nil || !reflect.DeepEqual(p, q) {
		t.Errorf("%v: %v", err, q)
	}
}

// Types left out are not touched.
func TestLeave(t *testing.T) {
	leave := still.Rules{Leave: []reflect.Type{reflect.TypeFor[*constant]()}}
	a, b := built(), built()
	a.fixed.table[0], b.fixed.table[0] = 1, 2
	pic, err := still.Take(a, leave)
	if err != nil {
		t.Fatal(err)
	}
	if err := still.Restore(b, pic, leave); err != nil || b.fixed.table[0] != 2 {
		t.Errorf("%v, %v", err, b.fixed.table)
	}
	if err := still.Restore(b, pic, still.Rules{}); !errors.Is(err, still.ErrOther) {
		t.Errorf("other rules: %v", err)
	}
}

func TestRefused(t *testing.T) {
	type bad struct{ p uintptr }
	if _, err := still.Take(&bad{p: 1}, still.Rules{}); err == nil || !strings.Contains(err.Error(), "bad.p") {
		t.Errorf("%v", err)
	}
	type box struct{ v any }
	pic, err := still.Take(&box{v: knot{}}, still.Rules{})
	if err != nil {
		t.Fatal(err)
	}
	if err := still.Restore(&box{}, pic, still.Rules{}); err == nil || !strings.Contains(err.Error(), "knot") {
		t.Errorf("%v", err)
	}
	if err := still.Restore(built(), pic, still.Rules{}); !errors.Is(err, still.ErrOther) {
		t.Errorf("another type: %v", err)
	}
	if _, err := still.Take(machine{}, still.Rules{}); err == nil {
		t.Error("no pointer: no error")
	}
}

// Whatever bytes come, there is an error or a value, never a panic.
func FuzzRestore(f *testing.F) {
	m := lived(func(i int) float64 { return float64(i) })
	pic, err := still.Take(m, still.Rules{})
	if err != nil {
		f.Fatal(err)
	}
	f.Add(pic[32:])
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, tail []byte) {
		_ = still.Restore(built(), append(append([]byte(nil), pic[:32]...), tail...), still.Rules{}) // any error will do
	})
}
