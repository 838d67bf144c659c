// Package alarm turns conditions into alarm states and a journal of their transitions, in the terms of IEC 62682 and
// ANSI/ISA-18.2.
//
// Needs: the conditions of this evaluation (findings, limits), the time, and what operators did.
// Waits: the on-delay of a point before it is raised, the off-delay before it returns.
// Emits: one Transition per visible change, numbered without a gap for ever.
//
// When a condition cannot be judged (Known false, or not mentioned at all) nothing changes: a gap never clears an
// alarm, and never raises one. A point that has never been judged is Unknown, which is not Normal; its first alarm is
// said to come from normal, where the diagram begins.
//
// # States
//
// The states and their letters are those of ANSI/ISA-18.2-2016 and IEC 62682 as handbook.md 9 quotes them (the paid
// standards were not seen): A normal, B unacknowledged, C acknowledged, D returned unacknowledged, E and F latched, G
// shelved, H suppressed by design, I out of service. A shelf has an end, at most Config.MaxShelf away, and a reason; out
// of service has a reason and no end. Both hide a point that goes on being judged. Two arrows go beyond the standard's
// figure: what was suppressed by design comes back as it was (a stop is no news), and what returned behind a shelf after
// people had been told of it waits for its acknowledgement. Unknown is ours.
//
// # Figures
//
//	deadband         the limit's own; counts from when the point stands, over restarts too
//	on-, off-delay   in time, in turns that could be judged, or both
//	first-up         Order 1 came first since nothing stood
//	chattering       3 activations of a point within a minute; it is then held until it has been quiet for a minute
//	flood            begins above 10 activations within 10 minutes, ends below 5; it is said, nothing is hidden by it
//	longest shelf    24 h, our own figure; what needs longer is taken out of service
//
// Chattering and flood are from memory of ISA-18.2 and EEMUA 191 (handbook.md 9 and methods.md 6.3 give the same, also
// from memory and from articles that quote them). Usual deadbands and delays, likewise from memory of EEMUA 191: pressure
// 2 % and 15 s, temperature 1 % and 60 s.
//
// # Time
//
// Time is the sample clock. A step of it counts for no delay, in either direction, and can keep nothing on a shelf for
// longer than the longest shelf.
//
// Lapwing informs; it is no protection system. No state of this package may be wired to trip or to hold off a trip.
package alarm
