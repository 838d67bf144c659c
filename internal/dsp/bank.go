package dsp

import (
	"fmt"
	"math"
)

// BankChannels is how many channels a Bank takes at most.
const BankChannels = 4

// Bank runs two band-passes, f and g, over the counts of up to four channels in one pass: from counts to engineering
// values to both bands. Each output is, to the last bit, what Filter.Process makes of gain·count + offset, whatever
// the processor and however the stream is cut. Where the processor has vectors of four (AVX2), the channels go side by
// side in them; the two bands and their sections fill each other's waiting times.
type Bank struct {
	coef   [12][BankChannels]float64           // B0, A1, A2 of each section, f's two and then g's; the same in all lanes
	gain   [BankChannels][BankChannels]float64 // row: channel; the same in all lanes
	offset [BankChannels][BankChannels]float64
	z      [8][BankChannels]float64 // transposed direct form II, two states a section; lane: channel
	in     [BankChannels][]int32    // of the call in hand; lanes without a channel of their own repeat others
	f, g   [BankChannels][]float64
	n      int // channels
	seen   int // samples since the last look for tiny states
	fresh  bool
}

// NewBank gives a bank at rest. f and g are two sections each with zeros at ±1, as BandPass makes them of order 2; gain
// and offset are by channel, one to four of them.
func NewBank(f, g SOS, gain, offset []float64) (*Bank, error) {
	if n := len(gain); n < 1 || n > BankChannels || n != len(offset) {
		return nil, fmt.Errorf("dsp: bank: %d gains, %d offsets", n, len(offset))
	}
	if len(f) != 2 || len(g) != 2 {
		return nil, fmt.Errorf("dsp: bank: %d and %d sections, want two each", len(f), len(g))
	}
	b := &Bank{n: len(gain), fresh: true}
	for i, s := range [4]Section{f[0], f[1], g[0], g[1]} {
		if s.B1 != 0 || s.B2 != -s.B0 {
			return nil, fmt.Errorf("dsp: bank: section %d is not of a band-pass", i+1)
		}
		b.coef[3*i], b.coef[3*i+1], b.coef[3*i+2] = all(s.B0), all(s.A1), all(s.A2)
	}
	for k := range BankChannels {
		b.gain[k], b.offset[k] = all(gain[k%b.n]), all(offset[k%b.n])
	}
	return b, nil
}

func all(x float64) [BankChannels]float64 { return [BankChannels]float64{x, x, x, x} }

// Reset puts the bank at rest: the next sample is taken for what has been there for ever.
func (b *Bank) Reset() { b.fresh = true }

// Process filters the next samples: in, f and g have an entry for each channel, all of the same length. f and g may
// share their slices, if the filters are the same.
func (b *Bank) Process(f, g [][]float64, in [][]int32) { b.process(f, g, in, hasAVX2) }

func (b *Bank) process(f, g [][]float64, in [][]int32, vectors bool) {
	if len(in) != b.n || len(f) != b.n || len(g) != b.n {
		panic("dsp: Bank: number of channels")
	}
	n := len(in[0])
	for k := range BankChannels {
		c := k % b.n
		if len(in[c]) != n || len(f[c]) != n || len(g[c]) != n {
			panic("dsp: Bank: lengths differ")
		}
		b.in[k], b.f[k], b.g[k] = in[c], f[c], g[c]
	}
	if n == 0 {
		return
	}
	if b.fresh {
		b.settle()
	}
	for from := 0; from < n; {
		m := min(n-from, flushEvery-b.seen)
		fours := 0
		if vectors && m >= 4 {
			fours = m &^ 3
			bankAVX2(b, from, fours)
		}
		bankPlain(b, from+fours, m-fours)
		from += m
		if b.seen += m; b.seen == flushEvery {
			b.flush()
			b.seen = 0
		}
	}
	b.in, b.f, b.g = [BankChannels][]int32{}, [BankChannels][]float64{}, [BankChannels][]float64{}
}

// settle is Filter.Settle on each channel's first sample: a band-pass at rest gives nothing, so its second section has
// seen nothing.
func (b *Bank) settle() {
	b.fresh, b.seen = false, 0
	b.z = [8][BankChannels]float64{}
	for k := range BankChannels {
		x := float64(b.gain[k][0]*float64(b.in[k][0])) + b.offset[k][0]
		for _, first := range [2]int{0, 2} {
			b0 := b.coef[3*first][k]
			b.z[2*first][k], b.z[2*first+1][k] = -b0*x, -b0*x
		}
	}
}

// bankPlain is the plain form, channel by channel: B1·x adds nothing, and B2·x is −B0·x to the last bit.
func bankPlain(b *Bank, from, n int) {
	p0, p1, p2 := b.coef[0][0], b.coef[1][0], b.coef[2][0]
	q0, q1, q2 := b.coef[3][0], b.coef[4][0], b.coef[5][0]
	r0, r1, r2 := b.coef[6][0], b.coef[7][0], b.coef[8][0]
	s0, s1, s2 := b.coef[9][0], b.coef[10][0], b.coef[11][0]
	for k := range b.n {
		gain, offset := b.gain[k][0], b.offset[k][0]
		a1, a2, b1, b2 := b.z[0][k], b.z[1][k], b.z[2][k], b.z[3][k]
		c1, c2, d1, d2 := b.z[4][k], b.z[5][k], b.z[6][k], b.z[7][k]
		in := b.in[k][from : from+n]
		f, g := b.f[k][from:from+n], b.g[k][from:from+n]
		for i, c := range in {
			x := float64(gain*float64(c)) + offset
			t := p0 * x
			y := t + a1
			a1 = a2 - float64(p1*y)
			a2 = -t - float64(p2*y)
			t = q0 * y
			y = t + b1
			b1 = b2 - float64(q1*y)
			b2 = -t - float64(q2*y)
			f[i] = y

			t = r0 * x
			y = t + c1
			c1 = c2 - float64(r1*y)
			c2 = -t - float64(r2*y)
			t = s0 * y
			y = t + d1
			d1 = d2 - float64(s1*y)
			d2 = -t - float64(s2*y)
			g[i] = y
		}
		for l := k; l < BankChannels; l += b.n { // and the lanes that repeat it
			b.z[0][l], b.z[1][l], b.z[2][l], b.z[3][l] = a1, a2, b1, b2
			b.z[4][l], b.z[5][l], b.z[6][l], b.z[7][l] = c1, c2, d1, d2
		}
	}
}

func (b *Bank) flush() {
	for i := range b.z {
		for k := range b.z[i] {
			if math.Abs(b.z[i][k]) < tiny {
				b.z[i][k] = 0
			}
		}
	}
}
