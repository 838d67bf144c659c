// Package duty says what a machine is being asked to do, what each feature should read at that duty, and how far it is off.
//
// Needs: one Input per throw and turn (speed, load step, pressures, window states) and the turn's measure.Vector.
// Waits: a few turns after a start or a load change before it calls the duty steady; a block of turns (15) for evidence.
// Emits: a Point per throw and turn; Deviations per turn at once; a Block per throw every 15 usable turns.
//
// When the duty is not known, or the traces show another load step or pressure than the process values tell yet, the
// Point's state is Unknown; when the baseline has not seen the duty, deviations say
// Seen false, and no block is made of them: nothing is judged by extrapolation.
//
// Expected values are a robust regression per throw and load step on ln(Pd/Ps), speed and ln Ps, with squares and one
// product (terms of reference/leaks.md section 4); terms that the learning run does not span are left out.
// Nothing adapts in service: a slow leak must not be learnt as normal.
package duty
