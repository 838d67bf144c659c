package still

import (
	"crypto/sha256"
	"fmt"
	"reflect"
	"slices"
	"strings"
	"time"
)

var timeType = reflect.TypeFor[time.Time]()

// Rules say what is special.
type Rules struct {
	Leave []reflect.Type // pointer types that are not followed: what a fresh value has there stays
	Make  []reflect.Type // types that an interface may hold without the fresh value holding one there
}

func (r *Rules) leaves(t reflect.Type) bool { return slices.Contains(r.Leave, t) }

// made finds a type that can be made anew in an interface: one of Make, or a plain one.
func (r *Rules) made(name string) reflect.Type {
	for _, list := range [][]reflect.Type{r.Make, simple} {
		for _, t := range list {
			if t.String() == name {
				return t
			}
		}
	}
	return nil
}

var simple = []reflect.Type{reflect.TypeFor[bool](), reflect.TypeFor[int](), reflect.TypeFor[int64](), reflect.TypeFor[float64](), reflect.TypeFor[string](),
	reflect.TypeFor[map[string]any](), reflect.TypeFor[[]any](), reflect.TypeFor[map[string]float64]()}

// plain tells whether values of a type hold nothing but numbers and truth values: they are carried as they lie in memory.
func plain(t reflect.Type) bool {
	switch t.Kind() {
	case reflect.Bool, reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64, reflect.Uint, reflect.Uint8, reflect.Uint16,
		reflect.Uint32, reflect.Uint64, reflect.Float32, reflect.Float64, reflect.Complex64, reflect.Complex128:
		return true
	case reflect.Array:
		return plain(t.Elem())
	}
	return false
}

// fingerprint is a checksum over a type and all types its values can lead to.
func fingerprint(t reflect.Type, rules *Rules) [sha256.Size]byte {
	var b strings.Builder
	seen := map[reflect.Type]bool{}
	var walk func(t reflect.Type)
	walk = func(t reflect.Type) {
		fmt.Fprintf(&b, "%s %s %d;", t, t.Kind(), t.Size())
		if seen[t] || rules.leaves(t) || t == timeType {
			return
		}
		seen[t] = true
		switch t.Kind() {
		case reflect.Struct:
			for i := range t.NumField() {
				b.WriteString(t.Field(i).Name)
				walk(t.Field(i).Type)
			}
		case reflect.Map:
			walk(t.Key())
			walk(t.Elem())
		case reflect.Pointer, reflect.Slice, reflect.Array:
			walk(t.Elem())
		}
	}
	walk(t)
	return sha256.Sum256([]byte(b.String()))
}
