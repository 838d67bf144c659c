package frame

// Quality says what happened to the phase reference during one revolution. Zero is a clean turn.
type Quality uint16

const (
	Extra     Quality = 1 << iota // pulses were seen that cannot be shaft marks; ignored
	Missing                       // an expected pulse did not come; the frame spans more than one revolution, or marks are missing in it
	Bounced                       // a pulse rang and crossed more than once
	Weak                          // a pulse's height fell under half of its neighbours'
	Gap                           // samples are missing inside the frame
	Clipped                       // the source reported an overrun or overload
	Starting                      // first turns after standstill: speed not yet established
	Uneven                        // speed changed more than the machine can between neighbouring turns
	LostTooth                     // a tooth of the wheel did not come; see Inner
)

// Frame is one revolution as sampled: from one once-per-turn mark to the next.
// Counts are valid until the next Add; copy what must live longer.
type Frame struct {
	Turn   int64     // number of the revolution since the source started; never repeats
	Seq0   int64     // sample number of Counts[i][0]; the first sample at or before Mark0
	Mark0  float64   // sample position (sub-sample) of the mark that opens the turn
	Mark1  float64   // ... and of the one that closes it; Mark1 - Mark0 > 0
	Inner  []float64 // toothed wheel: sample positions of the further marks, one for each of Wheel.Angles, NaN where the tooth was lost; empty with one mark a turn, and where Missing says that the teeth could not be told apart
	Counts [][]int32 // raw codes per input, from Seq0 to the last sample before Mark1 inclusive
	Q      Quality
}

// Good reports whether the frame is one whole revolution with trustworthy ends.
func (f *Frame) Good() bool { return f.Q&(Missing|Gap|Starting|Uneven) == 0 }
