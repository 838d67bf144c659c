// Package frame cuts the stream of samples into revolutions on the shaft's phase reference.
//
// Needs: blocks of all inputs in order, one of them the phase signal: one mark a turn, or a toothed wheel; or two, a wheel
// of equal teeth and one mark a turn apart from it.
// Waits: until the closing mark is sure: a twentieth of a turn after it, up to two fifths when it came off its time; half a
// tooth with a wheel. A wheel is found after a turn and its index, and gone through again from there.
// Emits: one Frame per revolution, raw codes and sub-sample marks (with a wheel one for each tooth), with what was wrong in Q.
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
//
// How a wheel is followed (Wheel says which tooth opens a turn and at what angles the others stand). A tooth is a swing of
// the signal that turns back by three tenths of the usual swing; its mark is where the active edge passes the middle
// between the usual tops and bottoms (the medians of the last eight), or of its own edge when that does not reach it. Each
// edge is compared with the time at which the next teeth are due: the speed of the last four, carried forward, and what
// this tooth's own lateness has been in earlier turns. How far off its time an edge may be follows the scatter of the teeth,
// a fifth to nine twentieths of a pitch, more over the gap. An edge that is none is ignored and told (Extra); a tooth that
// does not come is NaN in Frame.Inner and told (LostTooth), and mark 0, if it is the one, is laid on the parabola through its
// neighbours. When edges stand in the gap and teeth are lost, the place on the wheel is looked for anew, and the turn is cut
// where it belongs; what cannot be told apart is one frame marked Missing. A coil's signal wants its steep side as active edge
// (the flat one is lost in the gap); some wheels say nothing of the turn and are refused (Wheel.Check).
//
// A wheel beside a mark of its own (Wheel.Separate): the mark cuts the turns as above, and each cut is moved to the tooth that
// follows it, so that angles count from a tooth's edge. Which tooth that is, is learnt as a distance from the mark, so that
// neither jitter nor a lost tooth shifts it; a mark that comes within a tenth of a pitch after a tooth's edge belongs to that tooth.
package frame
