package still

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"reflect"
	"time"
	"unsafe"
)

// ErrOther says that a picture was taken by another build of the program, or of something else.
var ErrOther = errors.New("the state was taken by another version of this program")

var errShort = errors.New("cut short or damaged")

type restorer struct {
	rules  *Rules
	in     []byte
	known  []reflect.Value // pointers by number
	blocks []reflect.Value // slices by number, whole
	used   map[place]bool  // memory of the fresh value that has been filled: what is apart must not be put into one place
}

// Restore puts a picture back into what root leads to.
func Restore(root any, state []byte, rules Rules) (err error) {
	v := reflect.ValueOf(root)
	if v.Kind() != reflect.Pointer || v.IsNil() {
		return errors.New("still: a pointer is needed")
	}
	sum := fingerprint(v.Type(), &rules)
	if len(state) < len(sum) || !bytes.Equal(state[:len(sum)], sum[:]) {
		return fmt.Errorf("still: %w", ErrOther)
	}
	r := &restorer{rules: &rules, in: state[len(sum):], used: map[place]bool{}}
	if err := r.get(v.Elem(), v.Elem().Type().String()); err != nil {
		return fmt.Errorf("still: %w", err)
	}
	if len(r.in) > 0 {
		return fmt.Errorf("still: %d bytes too many: %w", len(r.in), errShort)
	}
	return nil
}

func (r *restorer) number() (int, error) {
	x, n := binary.Uvarint(r.in)
	if n <= 0 || x > 1<<40 {
		return 0, errShort
	}
	r.in = r.in[n:]
	return int(x), nil
}

func (r *restorer) bytes(n int) ([]byte, error) {
	if n < 0 || n > len(r.in) {
		return nil, errShort
	}
	b := r.in[:n]
	r.in = r.in[n:]
	return b, nil
}

// write changes memory only where it differs: constants that values point to may be read by others meanwhile.
func write(at unsafe.Pointer, b []byte) {
	if m := memory(at, len(b)); !bytes.Equal(m, b) {
		copy(m, b)
	}
}

func (r *restorer) get(v reflect.Value, path string) error {
	wrap := func(err error) error { return fmt.Errorf("%s: %w", path, err) }
	typ := v.Type()
	if plain(typ) {
		b, err := r.bytes(int(typ.Size()))
		if err != nil {
			return wrap(err)
		}
		write(unsafe.Pointer(v.UnsafeAddr()), b)
		return nil
	}
	if typ == timeType {
		n, err := r.number()
		if err != nil {
			return wrap(err)
		}
		b, err := r.bytes(n)
		if err != nil {
			return wrap(err)
		}
		var t time.Time
		if err := t.UnmarshalBinary(b); err != nil {
			return wrap(err)
		}
		if !t.Equal(v.Interface().(time.Time)) || t.IsZero() != v.Interface().(time.Time).IsZero() {
			v.Set(reflect.ValueOf(t.UTC()))
		}
		return nil
	}
	switch v.Kind() {
	case reflect.String:
		n, err := r.number()
		if err != nil {
			return wrap(err)
		}
		b, err := r.bytes(n)
		if err != nil {
			return wrap(err)
		}
		if v.String() != string(b) {
			v.SetString(string(b))
		}
	case reflect.Struct:
		for i := range v.NumField() {
			if err := r.get(open(v.Field(i)), path+"."+typ.Field(i).Name); err != nil {
				return err
			}
		}
	case reflect.Array:
		for i := range v.Len() {
			if err := r.get(v.Index(i), path); err != nil {
				return err
			}
		}
	case reflect.Pointer:
		return r.pointer(v, path)
	case reflect.Slice:
		return r.slice(v, path)
	case reflect.Map:
		return r.mapping(v, path)
	case reflect.Interface:
		return r.boxed(v, path)
	case reflect.Func, reflect.Chan:
	default:
		return wrap(fmt.Errorf("a %s cannot be carried", typ))
	}
	return nil
}

func (r *restorer) pointer(v reflect.Value, path string) error {
	if r.rules.leaves(v.Type()) {
		return nil
	}
	how, err := r.number()
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	switch how {
	case isNil:
		if !v.IsNil() {
			v.SetZero()
		}
		return nil
	case isNew:
		if v.IsNil() || r.used[place{v.UnsafePointer(), v.Type()}] {
			v.Set(reflect.New(v.Type().Elem()))
		}
		r.used[place{v.UnsafePointer(), v.Type()}] = true
		p := reflect.NewAt(v.Type().Elem(), v.UnsafePointer())
		r.known = append(r.known, p)
		return r.get(p.Elem(), path)
	case isKnown:
		n, err := r.number()
		if err != nil || n >= len(r.known) || r.known[n].Type() != v.Type() {
			return fmt.Errorf("%s: %w", path, errShort)
		}
		if v.UnsafePointer() != r.known[n].UnsafePointer() {
			v.Set(r.known[n])
		}
		return nil
	case isElement:
		i, err := r.number()
		if err != nil {
			return fmt.Errorf("%s: %w", path, err)
		}
		b, err := r.block(reflect.Zero(reflect.SliceOf(v.Type().Elem())), 0, path)
		if err != nil {
			return err
		}
		if i >= b.Len() {
			return fmt.Errorf("%s: %w", path, errShort)
		}
		v.Set(b.Index(i).Addr())
		return nil
	}
	return fmt.Errorf("%s: %w", path, errShort)
}

func (r *restorer) slice(v reflect.Value, path string) error {
	wrap := func() error { return fmt.Errorf("%s: %w", path, errShort) }
	how, err := r.number()
	if err != nil {
		return wrap()
	}
	typ := v.Type()
	switch how {
	case isNil:
		if !v.IsNil() {
			v.SetZero()
		}
		return nil
	case isEmpty:
		n, err := r.number()
		if err != nil || n > 0 && typ.Elem().Size() > 0 {
			return wrap()
		}
		if v.IsNil() || v.Len() != n {
			v.Set(reflect.MakeSlice(typ, n, n))
		}
		return nil
	case isNew:
	default:
		return wrap()
	}
	at, err := r.number()
	n, err2 := r.number()
	if err != nil || err2 != nil || n < 1 {
		return wrap()
	}
	whole, err := r.block(v, at, path)
	if err != nil {
		return err
	}
	if at+n > whole.Len() || whole.Type().Elem() != typ.Elem() {
		return wrap()
	}
	if v.Len() != n || v.UnsafePointer() != whole.Index(at).Addr().UnsafePointer() {
		v.Set(whole.Slice3(at, at+n, whole.Len()).Convert(typ))
	}
	return nil
}

// block reads a block, or finds the one that was read before. v is the slice of the fresh value that will begin at index
// at of it: its own memory is used where it is as long, since its elements may hold functions.
func (r *restorer) block(v reflect.Value, at int, path string) (reflect.Value, error) {
	wrap := func() (reflect.Value, error) { return reflect.Value{}, fmt.Errorf("%s: %w", path, errShort) }
	how, err := r.number()
	n, err2 := r.number()
	if err != nil || err2 != nil {
		return wrap()
	}
	if how == isKnown {
		if n >= len(r.blocks) || r.blocks[n].Type().Elem() != v.Type().Elem() {
			return wrap()
		}
		return r.blocks[n], nil
	}
	elem := v.Type().Elem()
	size := int(elem.Size())
	if how != isNew || plain(elem) && n*size > len(r.in) || n > len(r.in)+1<<16 {
		return wrap()
	}
	var whole reflect.Value
	if at == 0 && v.Len() == n && n > 0 && !r.used[place{v.UnsafePointer(), v.Type()}] {
		r.used[place{v.UnsafePointer(), v.Type()}] = true
		whole = v.Slice3(0, n, n)
	} else {
		whole = reflect.MakeSlice(v.Type(), n, n)
		reflect.Copy(whole, v)
	}
	r.blocks = append(r.blocks, whole)
	if plain(elem) {
		b, err := r.bytes(n * size)
		if err != nil {
			return wrap()
		}
		if n > 0 {
			write(whole.UnsafePointer(), b)
		}
		return whole, nil
	}
	for i := range n {
		if err := r.get(whole.Index(i), fmt.Sprintf("%s[%d]", path, i)); err != nil {
			return whole, err
		}
	}
	return whole, nil
}

func (r *restorer) mapping(v reflect.Value, path string) error {
	how, err := r.number()
	if err == nil && how == isNil {
		if !v.IsNil() {
			v.SetZero()
		}
		return nil
	}
	n, err2 := r.number()
	if err != nil || err2 != nil || how != isNew || n > len(r.in) {
		return fmt.Errorf("%s: %w", path, errShort)
	}
	m := reflect.MakeMapWithSize(v.Type(), n)
	for range n {
		k, x := reflect.New(v.Type().Key()).Elem(), reflect.New(v.Type().Elem()).Elem()
		if err := r.get(k, path+" key"); err != nil {
			return err
		}
		if old := v.MapIndex(k); old.IsValid() {
			x.Set(old)
		}
		if err := r.get(x, fmt.Sprintf("%s[%v]", path, k)); err != nil {
			return err
		}
		m.SetMapIndex(k, x)
	}
	v.Set(m)
	return nil
}

// boxed restores what an interface holds: of the type that the fresh value has there, or of a plain one.
func (r *restorer) boxed(v reflect.Value, path string) error {
	n, err := r.number()
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	if n == 0 {
		if !v.IsNil() {
			v.SetZero()
		}
		return nil
	}
	b, err := r.bytes(n)
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	name := string(b)
	var x reflect.Value
	switch {
	case !v.IsNil() && v.Elem().Type().String() == name:
		x = loose(v.Elem())
	case r.rules.made(name) != nil:
		x = reflect.New(r.rules.made(name)).Elem()
	default:
		return fmt.Errorf("%s: a %s in an interface cannot be made anew", path, name)
	}
	if err := r.get(x, path+".("+name+")"); err != nil {
		return err
	}
	v.Set(x)
	return nil
}
