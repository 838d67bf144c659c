// Package window finds the four valve events of each cylinder end in a turn and puts one angular window around each,
// so that a vibration peak is booked to the valve that made it, whatever the load.
//
// It needs: a turn in the angle domain, and per throw the cylinder with its open pocket and the gas's volume exponent.
// It waits: not at all; every turn answers for itself, with the memory of at most 40 turns before it.
// It emits: per end the closed strokes, the plateau pressures, four events and four windows with state and confidence.
// When it cannot: the window is held where the model puts it (Holding), then given up (Lost), always with a reason;
// an end that does no work is Idle, one that compresses without opening is NotDelivering.
//
// # How an event is found
//
// Pressure levels do not find a closed stroke at low ratio with pulsation; its local slope −d ln p/d ln V does. Where
// both valves are shut it is the gas's exponent. An opening is the first lasting departure from the line fitted to
// the end of that stroke; it needs neither line pressure nor pressure zero. A closing is found by walking back along
// the line fitted to the beginning; that is good for late suction closing and for discharge closing, and
// ill-conditioned for suction closing at full load, where the volume hardly changes. The intersection of the line
// with the end's own plateau is the most repeatable angle (Window.Thermo), and the one that leakage moves.
//
// The valve has lifted a little before its opening departs from the line by as much as can be told, and the more so
// the slower the trace moves: Window.Angle takes that back by how fast the departure grows.
//
// The estimators, their constants and the widths were measured on an independent model (figures beside the
// constants). The lag from departure to impact belongs to the valve and is learnt, in milliseconds, from the
// vibration; the tail of a window follows it, its lead is never narrowed. So is the lag of a late suction closing. A
// suction closing at full load is listened for: a valve may flutter shut well before the dead centre, or float well
// beyond it with the pulsation of the line, and no pressure shows either. Its window reaches to where it is heard,
// leaving out what rings of events that the pressure does show.
//
// The control system tells of a load step up to a second late. Until then the volumes may be wrong by a pocket, and a
// stroke looks open or ends in the wrong place: when the clearance told makes no sense of the trace and that of another
// load step does, this one is taken, and End.Clearance says so.
//
// A Result and everything in it is valid until the tracker's next Track.
package window
