package sensor

import (
	"math"

	"lapwing/internal/dsp"
)

// Mains is looked for in a slow copy of the signal (plain means of some 20 samples, about 2.5 kHz).
const (
	slowRate   = 2560.0 // samples per second, about
	lookFor    = 1.6    // s, window of a spectrum: lines 1.25 Hz wide
	tailFor    = 0.1    // s, of the quick look: every turn, but blind to what lies within 20 Hz of a line
	lines      = 10     // harmonics of the mains
	quickLines = 5
	halfLine   = 2 // bins to either side that belong to a line
	apart      = 2.5
	steady     = 0.005 // change of speed within a window, beyond which shaft orders smear over the lines
)

// slow is the slow copy of one channel.
type slow struct {
	every int // samples per mean
	sum   int64
	have  int
	next  int64 // sample number expected next
	buf   []float64
	at    int // where the next mean goes
	count int // means since the last break, at most len(buf)
	fresh int // means since the last look
	now   since
}

// since is what else a look needs to know of the turns since the last one.
type since struct {
	turn, seq  int64
	energy     float64 // Σ variance · samples
	n          float64
	least, top float64 // shortest and longest period, samples
}

func newSlow(rate float64) slow {
	every := max(1, int(rate/slowRate))
	n := dsp.FastLength(int(lookFor * rate / float64(every)))
	for n%2 != 0 {
		n = dsp.FastLength(n + 1)
	}
	return slow{every: every, next: -1, buf: make([]float64, n)}
}

// add takes the samples of a frame that begins at seq; neighbouring frames share a sample.
func (s *slow) add(x []int32, seq int64) {
	skip := s.next - seq
	if s.next < 0 || skip < 0 || skip > int64(len(x)) {
		s.sum, s.have, s.count, s.fresh, skip = 0, 0, 0, 0, 0
		s.now = since{}
	}
	s.next = seq + int64(len(x))
	x = x[skip:]
	for len(x) > 0 {
		m := min(len(x), s.every-s.have)
		s.sum += total(x[:m])
		x = x[m:]
		if s.have += m; s.have == s.every {
			s.buf[s.at] = float64(s.sum) / float64(s.every)
			s.sum, s.have = 0, 0
			if s.at++; s.at == len(s.buf) {
				s.at = 0
			}
			s.count, s.fresh = min(s.count+1, len(s.buf)), s.fresh+1
		}
	}
}

// total adds codes up, four sums side by side so that none waits for the one before it.
func total(x []int32) int64 {
	var a, b, c, d int64
	for len(x) >= 4 {
		a += int64(x[0])
		b += int64(x[1])
		c += int64(x[2])
		d += int64(x[3])
		x = x[4:]
	}
	for _, v := range x {
		a += int64(v)
	}
	return a + b + c + d
}

// note books the turn that was added last.
func (s *slow) note(turn, seq int64, sc *scan, period float64) {
	h := &s.now
	if h.n == 0 {
		h.turn, h.seq, h.least, h.top = turn, seq, period, period
	}
	h.energy += sc.rms * sc.rms * float64(sc.n)
	h.n += float64(sc.n)
	h.least, h.top = min(h.least, period), max(h.top, period)
}

// last copies the newest len(dst) means; false when there are not so many without a break.
func (s *slow) last(dst []float64) bool {
	if s.count < len(dst) {
		return false
	}
	from := s.at - len(dst)
	if from < 0 {
		from += len(s.buf)
	}
	k := copy(dst, s.buf[from:])
	copy(dst[k:], s.buf)
	return true
}

// mains is what all channels share for looking.
type mains struct {
	fs     float64 // of the slow copies
	freq   []float64
	welch  *dsp.Welch
	win    []float64 // of the quick look
	gain   float64   // sum of win
	tail   []float64
	window []float64
	psd    []float64
}

func newMains(rate, hz float64) (*mains, error) {
	s := newSlow(rate)
	m := &mains{fs: rate / float64(s.every), freq: []float64{50, 60}, window: make([]float64, len(s.buf))}
	if hz != 0 {
		m.freq = []float64{hz}
	}
	var err error
	if m.welch, err = dsp.NewWelch(m.fs, len(s.buf)); err != nil {
		return nil, err
	}
	m.psd = make([]float64, m.welch.Bins())
	m.tail = make([]float64, int(tailFor*m.fs))
	for i := range m.tail {
		m.win = append(m.win, 0.5-0.5*math.Cos(2*math.Pi*float64(i)/float64(len(m.tail))))
		m.gain += m.win[i]
	}
	return m, nil
}

// quick gives the share of a variance that lies in mains lines over the last tenth of a second, whichever mains
// frequency gives more.
func (m *mains) quick(s *slow, variance float64) (share float64, ok bool) {
	if variance <= 0 || len(m.tail) < 16 || !s.last(m.tail) {
		return 0, false
	}
	var mean float64
	for _, v := range m.tail {
		mean += v
	}
	mean /= float64(len(m.tail))
	for i := range m.tail {
		m.tail[i] = (m.tail[i] - mean) * m.win[i]
	}
	for _, f := range m.freq {
		var p float64
		for h := 1; h <= quickLines && float64(h)*f < 0.4*m.fs; h++ {
			p += 2 * goertzel(m.tail, 2*math.Pi*float64(h)*f/m.fs) / (m.gain * m.gain)
		}
		share = max(share, p/variance)
	}
	return min(1, share), true
}

// goertzel gives |Σ x e^{-jωi}|² (Goertzel, Am. Math. Monthly 65 (1958) 34).
func goertzel(x []float64, w float64) float64 {
	c := 2 * math.Cos(w)
	a, b := 0.0, 0.0
	for _, v := range x {
		a, b = v+c*a-b, a
	}
	return a*a + b*b - c*a*b
}

// look is what a spectrum shows: by mains frequency, the power in lines that no shaft order is near, as a share of the
// signal's variance, and in codes² .
type look struct {
	share, power [2]float64
	since        since
}

// look makes one when a window of new samples has come and the speed has stood still enough within it.
func (m *mains) look(s *slow) (l look, ok bool) {
	if s.fresh < len(s.buf) {
		return l, false
	}
	now := s.now
	s.now, s.fresh = since{}, 0
	if now.n == 0 || !s.last(m.window) {
		return l, false
	}
	variance := now.energy / now.n
	if now.top > (1+steady)*now.least || variance <= 0 {
		return l, false
	}
	m.welch.PSD(m.psd, m.window)
	shaft := m.fs * float64(s.every) * 2 / (now.least + now.top)
	l.since = now
	for i, f := range m.freq {
		for h := 1; h <= lines; h++ {
			if hz := float64(h) * f; hz < 0.25*m.fs && clearOf(hz, shaft) {
				l.power[i] += m.line(hz)
			}
		}
		l.share[i] = min(1, l.power[i]/variance)
	}
	return l, true
}

// clearOf reports whether no shaft order lies so near that it cannot be told from a mains line.
func clearOf(hz, shaft float64) bool {
	return math.Abs(hz-shaft*math.Round(hz/shaft)) > apart+steady/2*hz
}

// line is the power of the line at hz above its surroundings.
func (m *mains) line(hz float64) float64 {
	step := m.welch.Step()
	at := int(math.Round(hz / step))
	if at < 8 || at+8 >= len(m.psd) {
		return 0
	}
	var in, around float64
	for i := -7; i <= 7; i++ {
		switch d := max(i, -i); {
		case d <= halfLine:
			in += m.psd[at+i]
		case d > halfLine+1:
			around += m.psd[at+i]
		}
	}
	return max(0, in-around*(2*halfLine+1)/8) * step
}
