package still

import (
	"encoding/binary"
	"errors"
	"fmt"
	"reflect"
	"slices"
	"sort"
	"time"
	"unsafe"
)

// How a pointer or slice was written.
const (
	isNil     = iota
	isEmpty   // a slice of no length
	isKnown   // written before: its number
	isNew     // its contents follow
	isElement // a pointer into a block: the index, the block
)

// block is a stretch of memory that slices share.
type block struct {
	from, to uintptr
	elem     reflect.Type
	number   int // as written; -1 not yet
}

type place struct {
	at  unsafe.Pointer
	typ reflect.Type
}

type taker struct {
	rules  *Rules
	out    []byte
	known  map[place]int
	blocks []block
	count  int // of blocks written
	seen   map[place]bool
}

// Take pictures the state that root, a pointer, leads to.
func Take(root any, rules Rules) ([]byte, error) {
	v := reflect.ValueOf(root)
	if v.Kind() != reflect.Pointer || v.IsNil() {
		return nil, errors.New("still: a pointer is needed")
	}
	t := &taker{rules: &rules, known: map[place]int{}, seen: map[place]bool{}}
	t.scan(v.Elem())
	t.merge()
	sum := fingerprint(v.Type(), &rules)
	t.out = append(t.out, sum[:]...)
	if err := t.put(v.Elem(), v.Elem().Type().String()); err != nil {
		return nil, fmt.Errorf("still: %w", err)
	}
	return t.out, nil
}

// open makes a field that other packages may not touch readable and settable.
func open(v reflect.Value) reflect.Value {
	return reflect.NewAt(v.Type(), unsafe.Pointer(v.UnsafeAddr())).Elem()
}

// loose gives an addressable copy of a value that has no place of its own: out of a map or an interface.
func loose(v reflect.Value) reflect.Value {
	c := reflect.New(v.Type()).Elem()
	c.Set(v)
	return c
}

// scan finds all memory that slices lie in.
func (t *taker) scan(v reflect.Value) {
	if plain(v.Type()) || v.Type() == timeType {
		return
	}
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			t.scan(open(v.Field(i)))
		}
	case reflect.Array:
		for i := range v.Len() {
			t.scan(v.Index(i))
		}
	case reflect.Pointer:
		p := place{v.UnsafePointer(), v.Type()}
		if v.IsNil() || t.rules.leaves(v.Type()) || t.seen[p] {
			return
		}
		t.seen[p] = true
		t.scan(v.Elem())
	case reflect.Slice:
		size := v.Type().Elem().Size()
		if v.Len() == 0 || size == 0 {
			return
		}
		from := uintptr(v.UnsafePointer())
		b := block{from: from, to: from + uintptr(v.Len())*size, elem: v.Type().Elem(), number: -1}
		for _, have := range t.blocks {
			if have.from == b.from && have.to == b.to && have.elem == b.elem {
				return
			}
		}
		t.blocks = append(t.blocks, b)
		if !plain(b.elem) {
			for i := range v.Len() {
				t.scan(v.Index(i))
			}
		}
	case reflect.Map:
		for it := v.MapRange(); it.Next(); {
			t.scan(loose(it.Value()))
		}
	case reflect.Interface:
		if !v.IsNil() {
			t.scan(loose(v.Elem()))
		}
	}
}

// merge makes one block of those that overlap.
func (t *taker) merge() {
	slices.SortFunc(t.blocks, func(a, b block) int {
		switch {
		case a.from != b.from:
			return order(a.from, b.from)
		}
		return order(b.to, a.to)
	})
	var out []block
	for _, b := range t.blocks {
		if n := len(out); n > 0 && b.from < out[n-1].to && b.elem == out[n-1].elem {
			out[n-1].to = max(out[n-1].to, b.to)
			continue
		}
		out = append(out, b)
	}
	t.blocks = out
}

func order(a, b uintptr) int {
	if a < b {
		return -1
	}
	if a > b {
		return 1
	}
	return 0
}

// find gives the block that memory lies in.
func (t *taker) find(at unsafe.Pointer, elem reflect.Type) *block {
	i := sort.Search(len(t.blocks), func(i int) bool { return t.blocks[i].from > uintptr(at) }) - 1
	for ; i >= 0 && uintptr(at) < t.blocks[i].to; i-- {
		if b := &t.blocks[i]; b.elem == elem && (uintptr(at)-b.from)%elem.Size() == 0 {
			return b
		}
	}
	return nil
}

func (t *taker) number(n int) { t.out = binary.AppendUvarint(t.out, uint64(n)) }

func memory(at unsafe.Pointer, bytes int) []byte { return unsafe.Slice((*byte)(at), bytes) }

func (t *taker) put(v reflect.Value, path string) error {
	typ := v.Type()
	if plain(typ) {
		t.out = append(t.out, memory(unsafe.Pointer(v.UnsafeAddr()), int(typ.Size()))...)
		return nil
	}
	if typ == timeType {
		b, err := v.Interface().(time.Time).MarshalBinary()
		if err != nil {
			return fmt.Errorf("%s: %w", path, err)
		}
		t.number(len(b))
		t.out = append(t.out, b...)
		return nil
	}
	switch v.Kind() {
	case reflect.String:
		t.number(v.Len())
		t.out = append(t.out, v.String()...)
	case reflect.Struct:
		for i := range v.NumField() {
			if err := t.put(open(v.Field(i)), path+"."+typ.Field(i).Name); err != nil {
				return err
			}
		}
	case reflect.Array:
		for i := range v.Len() {
			if err := t.put(v.Index(i), fmt.Sprintf("%s[%d]", path, i)); err != nil {
				return err
			}
		}
	case reflect.Pointer:
		return t.pointer(v, path)
	case reflect.Slice:
		return t.slice(v, path)
	case reflect.Map:
		return t.mapping(v, path)
	case reflect.Interface:
		if v.IsNil() {
			t.number(0)
			return nil
		}
		name := v.Elem().Type().String()
		t.number(len(name))
		t.out = append(t.out, name...)
		return t.put(loose(v.Elem()), path+".("+name+")")
	case reflect.Func, reflect.Chan:
		// a fresh value has its own
	default:
		return fmt.Errorf("%s: a %s cannot be carried", path, typ)
	}
	return nil
}

func (t *taker) pointer(v reflect.Value, path string) error {
	if t.rules.leaves(v.Type()) {
		return nil
	}
	if v.IsNil() {
		t.number(isNil)
		return nil
	}
	p := place{v.UnsafePointer(), v.Type()}
	if n, ok := t.known[p]; ok {
		t.number(isKnown)
		t.number(n)
		return nil
	}
	if b := t.find(p.at, v.Type().Elem()); b != nil {
		t.number(isElement)
		at := int((uintptr(p.at) - b.from) / b.elem.Size())
		t.number(at)
		return t.block(b, unsafe.Add(p.at, -at*int(b.elem.Size())), path)
	}
	t.known[p] = len(t.known)
	t.number(isNew)
	return t.put(v.Elem(), path)
}

func (t *taker) slice(v reflect.Value, path string) error {
	elem := v.Type().Elem()
	switch {
	case v.IsNil():
		t.number(isNil)
		return nil
	case v.Len() == 0 || elem.Size() == 0:
		t.number(isEmpty)
		t.number(v.Len())
		return nil
	}
	b := t.find(v.UnsafePointer(), elem)
	if b == nil {
		return fmt.Errorf("%s: memory that was not found before", path)
	}
	at := int((uintptr(v.UnsafePointer()) - b.from) / elem.Size())
	t.number(isNew)
	t.number(at)
	t.number(v.Len())
	return t.block(b, unsafe.Add(v.UnsafePointer(), -at*int(elem.Size())), path)
}

// block writes the number of a block, and its contents when it is the first time.
func (t *taker) block(b *block, start unsafe.Pointer, path string) error {
	if b.number >= 0 {
		t.number(isKnown)
		t.number(b.number)
		return nil
	}
	b.number = t.count
	t.count++
	size := int(b.elem.Size())
	n := int(b.to-b.from) / size
	t.number(isNew)
	t.number(n)
	if plain(b.elem) {
		t.out = append(t.out, memory(start, n*size)...)
		return nil
	}
	for i := range n {
		if err := t.put(reflect.NewAt(b.elem, unsafe.Add(start, i*size)).Elem(), fmt.Sprintf("%s[%d]", path, i)); err != nil {
			return err
		}
	}
	return nil
}

// mapping writes the keys in the order of their own bytes, so that equal states give equal pictures.
func (t *taker) mapping(v reflect.Value, path string) error {
	if v.IsNil() {
		t.number(isNil)
		return nil
	}
	t.number(isNew)
	t.number(v.Len())
	type entry struct {
		key  []byte
		k, v reflect.Value
	}
	var all []entry
	for it := v.MapRange(); it.Next(); {
		sub := &taker{rules: t.rules, known: map[place]int{}}
		k := loose(it.Key())
		if err := sub.put(k, path+" key"); err != nil {
			return err
		}
		all = append(all, entry{sub.out, k, loose(it.Value())})
	}
	slices.SortFunc(all, func(a, b entry) int { return slices.Compare(a.key, b.key) })
	for _, e := range all {
		t.out = append(t.out, e.key...)
		if err := t.put(e.v, fmt.Sprintf("%s[%v]", path, e.k)); err != nil {
			return err
		}
	}
	return nil
}
