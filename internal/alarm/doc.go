// Package alarm turns conditions into alarm states and a journal of their transitions, in the terms of IEC 62682 and
// ANSI/ISA-18.2.
//
// Needs: the conditions of this evaluation (findings, limits), the time, and what operators did.
// Waits: the on-delay of a point before it is raised, the off-delay before it returns.
// Emits: one Transition per visible change, numbered without a gap for ever.
//
// When a condition cannot be judged (Known false, or not mentioned at all) nothing changes: a gap never clears an
// alarm, and never raises one. A point that has never been judged is Unknown, which is not Normal.
//
// Lapwing informs; it is no protection system. No state of this package may be wired to trip or to hold off a trip.
package alarm
