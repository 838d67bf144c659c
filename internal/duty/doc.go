// Package duty says what a machine is being asked to do, what each feature should read at that duty, and how far it is off.
//
// Needs: one Input per throw and turn (speed, load step, pressures, window states) and the turn's measure.Vector.
// Waits: a few turns after a start or a load change before it calls the duty steady; a block of turns (15) for evidence.
// Emits: a Point per throw and turn; Deviations per turn at once; a Block per throw every 15 usable turns.
//
// When the duty is not known, or the traces show another load step than the process values tell yet, or one gauge alone
// another pressure, the Point's state is Unknown; a throw of which no end works is Unloaded, a speed outside the stated
// range OutOfRange. When the baseline has not seen the duty, deviations say Seen false, and no block is made of them:
// nothing is judged by extrapolation.
//
// Expected values are a robust regression per throw and load step on ln(Pd/Ps), speed and ln Ps, with squares and one
// product (terms of reference/leaks.md section 4); terms that the learning run does not span are left out.
// Nothing adapts in service: a slow leak must not be learnt as normal.
//
// A learning run begins from nothing (NewLearner), adds load steps (NewAddition) or learns anew what work on one part has
// touched (Touched, NewRenewal). Examine holds what came of it against physics that needs no baseline, as a leak that was
// there while it was learnt would be normal from then on.
//
// A sudden change shows in one block; a slow one in a two-sided CUSUM over medians of settled blocks (Deviation.Drift).
package duty
