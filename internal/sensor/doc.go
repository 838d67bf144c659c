// Package sensor says what state each channel and the phase reference are in, before anything is read into a valve.
//
// It needs: every revolution's frame in order, and now and then the state of the shaft reference.
// It waits: for a second suspect turn (hum: a second look, two looks a window of 1.6 s) before a state changes.
// It emits: a State per channel with its reason, and for any range of samples why a channel must not be used there.
// When it cannot (samples missing, no marks, nothing learnt yet): the check is left out; a channel that has not been
// looked at yet is "function check", never "good".
//
// A single suspect turn is not used, which costs one turn. A second one within four turns confirms the fault: the
// channel is withdrawn from the first of the two on, and given back after 50 turns without suspicion (outside the valid
// range: a third within six, since bursts do that now and then). What only asks for maintenance (hum in an accelerometer, far below the impact band) leaves the channel in use.
//
// Rules and first thresholds: reference/vibration.md section 5 (measured advice); those that differ say why where they
// stand. Three things a broken sensor shows only against what was usual (noise, hum, a whole level) are compared
// with what the channel did in the turns that were declared healthy, or in its first good ones.
//
// What a baseline is needed for (gain of an accelerometer, zero of a pressure transmitter) shows in the state too, but
// it is the judge that raises it: see Shift. Level follows pressure zeros as slowly as temperature moves them and finds
// sensitivities that are off, Slip watches the phase reference by the fitted phase; what they find, and what the station
// finds of gauge passages, is told with Tell: maintenance required, the channel stays in use.
//
// Measured on the modelled biomethane machine (TestPressureErrorsAreTheChannels, TestPhaseSlipIsThePhaseReferences of
// station, LAPWING_FIELD=1): zeros off by 0.5, 1, 2 % of span either way named by the judge after 3 to 7 s, sensitivities
// off by 1, 2, 5 % named here after 18 to 23 s and within 0.1 points of the truth, slips of 0.5 and 1.5° after 12 s and
// within 0.01°; 12 + 12 + 4 cases, no valve named in any.
package sensor
