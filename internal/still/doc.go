// Package still takes a picture of the whole state of a value and puts it back into another one that was built alike, to
// the last bit: filters, histories, learnt values, open counts, whatever fields they are kept in.
//
//	Needs: a pointer to the value; to put it back, a pointer to a fresh value made from the same configuration.
//	Waits: not at all; the value must stand still meanwhile.
//	Emits: bytes that only the same build of the program can read: a checksum over all types involved says so.
//	It gives an error that names the field when there is something it cannot carry, and has then changed part of the
//	value: throw it away.
//
// Why by reflection and not by a method in every room: what decides whether an analysis can be repeated to the last bit is
// the one field that somebody forgot. Here none can be, and a new field needs no thought. Functions, channels and the
// types that Rules leave out are not carried: a fresh value has its own. Values that share memory (slices of one array, two pointers
// to one thing, a pointer to an element) share it again afterwards; a pointer to a field of a struct that is also
// reached as a whole is the one kind of sharing that is not kept.
package still
