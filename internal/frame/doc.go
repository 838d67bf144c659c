// Package frame cuts the stream of samples into revolutions on the shaft's phase reference.
//
// Needs: blocks of all inputs in order, one of them the phase signal with one mark a turn.
// Waits: until the closing mark is sure: a twentieth of a turn after it, up to two fifths when it came off its time.
// Emits: one Frame per revolution, raw codes and sub-sample marks, with what was wrong in Q.
// When it cannot: at standstill, and until the speed is established again, there is no frame or one marked Starting;
// a revolution whose mark did not come is part of a longer frame marked Missing, never half a frame.
//
// What comes out depends on the samples alone, to the bit, not on how the stream was cut into blocks. Clipped is the
// exception: a source reports overloads by the block.
//
// How a mark is found. The signal passes a median of three samples, which takes out single-sample spikes and leaves
// edges alone. A pulse is an excursion from the resting level past a quarter of the usual pulse height (the median of
// the last eight), but not less than six times the noise; it ends at half of that. The instant of the mark is where
// its edge passes half the pulse's own height, interpolated between samples, so a fading signal does not move the
// mark. Then time decides: a mark must come at a whole number of expected periods. The expected period is the median
// of the newest three, carried forward along their trend; the tolerance is 8 % of a period and 20 % per second of the
// change of speed that a machine can make.
package frame
