package sensor

import "math"

// Levels is what was usual on a channel while it was learnt. Codes. The zero value knows nothing.
type Levels struct {
	N     int        `json:"turns"`
	RMS   [2]float64 `json:"rms"`   // least, greatest, about the mean
	Quiet [2]float64 `json:"quiet"` // of the noise in the quietest stretches
	White float64    `json:"white"` // least noise of whole turns
	Run   int        `json:"run"`   // longest stretch of one code
	Rail  int        `json:"rail"`  // longest stretch at an extreme
	Looks int        `json:"looks"` // spectra seen
	Share [2]float64 `json:"share"` // greatest share of mains, by mains frequency
	Power [2]float64 `json:"power"` // and its power
}

func (l *Levels) take(s *scan) {
	if l.N == 0 {
		l.RMS, l.Quiet, l.White = [2]float64{s.rms, s.rms}, [2]float64{s.quiet, s.quiet}, s.white
	}
	l.N++
	l.RMS = [2]float64{min(l.RMS[0], s.rms), max(l.RMS[1], s.rms)}
	l.Quiet = [2]float64{min(l.Quiet[0], s.quiet), max(l.Quiet[1], s.quiet)}
	l.White = min(l.White, s.white)
	l.Run, l.Rail = max(l.Run, s.run), max(l.Rail, s.top, s.bottom)
}

func (l *Levels) takeLook(k *look) {
	l.Looks++
	for i := range k.share {
		l.Share[i], l.Power[i] = max(l.Share[i], k.share[i]), max(l.Power[i], k.power[i])
	}
}

// sound reports whether levels read back can have been learnt.
func (l *Levels) sound() bool {
	for _, v := range [...]float64{l.RMS[0], l.RMS[1], l.Quiet[0], l.Quiet[1], l.White, l.Share[0], l.Share[1], l.Power[0], l.Power[1]} {
		if !(v >= 0) || math.IsInf(v, 0) {
			return false
		}
	}
	return l.N >= 0 && l.Looks >= 0 && l.Run >= 0 && l.Rail >= 0
}
