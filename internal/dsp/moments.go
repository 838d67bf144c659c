package dsp

// Moments are what a stretch of counts shows in one pass, about its first count, so that sums stay small. Sums run in
// four lanes, sample j of a part in lane j modulo 4, so that they have the same bits in vectors of four (AVX2) as
// without.
type Moments struct {
	base         float64
	square       [4]float64 // Σ (x − base)²
	two, four    [4]float64 // Σ d² and Σ d⁴ of the first differences d
	sum          [4]float64 // of the part in hand: Σ (x − base)
	bent         [4]float64 // of the part in hand: Σ of the squares of the second differences
	least, most  [8]int32   // of the part in hand
	run, longest int64      // stretch of one count that the newest belongs to; the longest
	x            []int32
	at           int
}

// Part is what belongs to one part of the stretch.
type Part struct {
	Sum         float64 // Σ (x − base), exact
	Bent        float64 // Σ of the squares of the second differences that end in it
	Least, Most int32
}

// Begin readies for a stretch of at least two counts. The counts before it are taken to have been like its first.
func (m *Moments) Begin(x []int32) {
	*m = Moments{base: float64(x[0]), x: x}
}

// Part takes the counts from where the last part ended up to to, at least one.
func (m *Moments) Part(to int) Part { return m.part(to, hasAVX2) }

func (m *Moments) part(to int, vectors bool) Part {
	from := m.at
	m.sum, m.bent = [4]float64{}, [4]float64{}
	for i := range m.least {
		m.least[i], m.most[i] = m.x[from], m.x[from]
	}
	if from < 8 { // vectors look back
		n := min(to-from, 8)
		momentsPlain(m, from, n)
		from += n
	}
	if n := (to - from) &^ 7; vectors && n > 0 {
		momentsAVX2(m, &m.x[from], n)
		from += n
	}
	momentsPlain(m, from, to-from)
	m.at = to
	p := Part{Sum: lanes4(&m.sum), Bent: lanes4(&m.bent), Least: m.least[0], Most: m.most[0]}
	for i := range m.least {
		p.Least, p.Most = min(p.Least, m.least[i]), max(p.Most, m.most[i])
	}
	return p
}

func lanes4(s *[4]float64) float64 { return (s[0] + s[1]) + (s[2] + s[3]) }

// Base is the count that sums are about, Square the sum of the squares about it.
func (m *Moments) Base() float64   { return m.base }
func (m *Moments) Square() float64 { return lanes4(&m.square) }

// Two and Four are the sums of the squares and of the fourth powers of the first differences.
func (m *Moments) Two() float64  { return lanes4(&m.two) }
func (m *Moments) Four() float64 { return lanes4(&m.four) }

// Longest is the longest stretch of one count, samples.
func (m *Moments) Longest() int { return int(m.longest) }

func momentsPlain(m *Moments, from, n int) {
	if n <= 0 {
		return
	}
	b, c := m.base, m.base // the two before
	if from > 0 {
		b = float64(m.x[from-1])
	}
	if from > 1 {
		c = float64(m.x[from-2])
	}
	for j, v := range m.x[from : from+n] {
		k := j & 3
		a := float64(v)
		f, d := a-m.base, a-b
		dd := d - (b - c)
		d2 := float64(d * d)
		m.sum[k] += f
		m.square[k] += float64(f * f)
		m.two[k] += d2
		m.four[k] += float64(d2 * d2)
		m.bent[k] += float64(dd * dd)
		if k = j & 7; v < m.least[k] {
			m.least[k] = v
		} else if v > m.most[k] {
			m.most[k] = v
		}
		if d == 0 && from+j > 0 {
			m.run++
		} else {
			m.run = 1
		}
		m.longest = max(m.longest, m.run)
		b, c = a, b
	}
}

// runs tells of eight counts, of which bit i says that count i is like the one before it: how many ones the byte begins
// with, the longest run that begins and ends inside, and the run at its end, without what was before a byte of ones.
var runs = func() (table [256][4]uint8) {
	for m := range 256 {
		run, longest, prefix := 1, 0, 0
		for i := range 8 {
			if m>>i&1 == 0 {
				run = 1
			} else {
				run++
			}
			if m&(1<<(i+1)-1) == 1<<(i+1)-1 {
				prefix = i + 1
			} else {
				longest = max(longest, run)
			}
		}
		if m == 255 {
			run--
		}
		table[m] = [4]uint8{uint8(prefix), uint8(longest), uint8(run)}
	}
	return table
}()
