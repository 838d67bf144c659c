// Package model is a reciprocating compressor in numbers: it gives the samples that a described machine with given
// faults would give, and the truth beside them.
//
// It needs: a skid, a script of timed changes, a seed.
// It waits: for nothing; every call of Fill computes the next samples, whatever their number, to the same bits.
// It emits: raw counts of every channel; process values; one Truth per end and turn, half a turn after it closed.
// When it cannot: New refuses a skid without line pressures, or a script that names what the skid does not have.
//
// What can go wrong with it, by the name in a Script (units beside the constants in script.go):
//
//	valves      ValveLeak, Broken (plate cracked: harder blows), Missing (a piece gone: hole, harder blows, rattle),
//	            Sticky (to the seat: opens late and hard; 0.02 to 0.1), Gummed (to the stop: closes late and hard;
//	            0.002 to 0.01), Springs (weak 0.3: closes late; stiff 3 to 5: flutters)
//	cylinder    RingLeak, PackingLeak, WallHeat
//	gas         GasExponent, GasWeight: another gas than the skid says
//	load        LoadStep, Speed, SuctionPressure, DischargePressure, SuctionTemp; Pocket and LateClosing move a variable
//	            pocket and stepless control on top of the load step; Recycle
//	pressure    PressureZero (with Over: a drift), PressureGain
//	vibration   AccelGain
//	any channel Clip, OpenCircuit, Flat, Hum, Noisy, Swapped
//	shaft mark  PhaseSlip, ExtraPulses, MissedPulses
//	readings    FrozenProcess
//
// The gas of a stage is ideal within a turn, with the R·Z at suction and the mean volume isentropic exponent of its real
// gas (package gas) at the present lines; both follow the script. With Params.RealPath the exponent also moves within the
// stroke, as along the real isentrope. Each end is one well-mixed volume with an open-system energy balance (methods:
// Bloch and Hoefner, Reciprocating Compressors, 1996; valve and cylinder equations as in Brun and Kurz, Compression
// Machinery for Oil and Gas, 2019, ch. 5).
package model

import (
	"fmt"
	"math"
	"math/rand/v2"

	"lapwing/internal/acq"
	"lapwing/internal/skid"
)

// DefaultRate is the sampling rate taken when Options.Rate is zero, samples per second and channel.
const DefaultRate = 51200

// slowEvery is how many samples lie between two looks at script, lines and wall temperatures; values move linearly
// in between.
const slowEvery = 64

// historyKept is how many process readings are remembered.
const historyKept = 7200

// truthsKept bounds the truths nobody has asked for.
const truthsKept = 1 << 15

// Options are what is not physics.
type Options struct {
	Seed   uint64
	Rate   float64 // samples per second; 0: DefaultRate
	Bits   int     // converter width, 12..32; 0: 24
	Params *Params // nil: Typical
}

// Machine is a running compressor. It is not safe for concurrent use.
type Machine struct {
	sk    *skid.Skid
	par   Params
	plan  plan
	gases *gasMap   // nil: the gas is the same at every duty
	base  skid.Line // the duty for which Params was made
	gas0  Gas       // what gases says of it, once that was asked

	rate, dt float64
	bits     int
	n        int64 // samples given so far

	rev          int64   // shaft turns completed
	theta        float64 // rad after the phase mark, 0..2π
	omega, dOm   float64 // mean speed, and its change per sample
	ripple       []harmonic
	cosN, sinN   [maxOrder + 1]float64
	step         int // load step in force
	stages       []*stage
	throws       []*throw
	chans        []*channel
	inputs       int
	mark         *marker
	once         *marker    // beside a wheel whose teeth are all alike
	scatter      *rand.Rand // turn-to-turn scatter: breakaway, transfer of impacts
	procNoise    *rand.Rand
	history      []skid.Process // the newest readings, at most historyKept
	forgotten    int            // readings before history[0]
	historyEvery int64
	truths       []Truth
	loose        *rand.Rand // rattle of loose pieces
	swaps        []exchange
}

// harmonic is one order of a periodic quantity, as a share: a·cos(nθ) + b·sin(nθ).
type harmonic struct {
	order int
	a, b  float64
}

const maxOrder = 6

// New builds a machine at rest in its first thermodynamic guess; two or three turns later it has settled.
func New(sk *skid.Skid, s Script, o Options) (*Machine, error) {
	if len(sk.Throws) == 0 {
		return nil, fmt.Errorf("model: the skid has no throw")
	}
	m := &Machine{sk: sk, rate: o.Rate, bits: o.Bits}
	if m.rate == 0 {
		m.rate = DefaultRate
	}
	if !(m.rate >= 2000 && m.rate <= 1e6) {
		return nil, fmt.Errorf("model: sampling rate %g Hz is outside 2000 to 1000000", m.rate)
	}
	if m.bits == 0 {
		m.bits = 24
	}
	if m.bits < 12 || m.bits > 32 {
		return nil, fmt.Errorf("model: converter width %d bits is outside 12 to 32", m.bits)
	}
	m.dt = 1 / m.rate
	if o.Params != nil {
		m.par = *o.Params
	} else {
		p, err := Typical(sk, s.Lines)
		if err != nil {
			return nil, err
		}
		m.par = p
	}
	var err error
	if m.plan, err = newPlan(sk, s, m.par); err != nil {
		return nil, err
	}
	m.scatter = stream(o.Seed, 1)
	m.procNoise = stream(o.Seed, 2)
	m.loose = stream(o.Seed, 4)
	for _, h := range m.par.Ripple {
		if h.Order < 1 || h.Order > maxOrder {
			return nil, fmt.Errorf("model: ripple order %d is outside 1 to %d", h.Order, maxOrder)
		}
		a, b := math.Cos(h.Phase*math.Pi/180), math.Sin(h.Phase*math.Pi/180)
		m.ripple = append(m.ripple, harmonic{h.Order, h.Amp * a, h.Amp * b})
	}
	m.theta = m.par.StartDeg * math.Pi / 180
	m.omega = m.plan.speed.at(0) * math.Pi / 30
	m.buildStages(sk)
	if err := m.buildThrows(o.Seed); err != nil {
		return nil, err
	}
	if err := m.buildChannels(o.Seed); err != nil {
		return nil, err
	}
	m.wireSwaps()
	m.historyEvery = int64(m.rate/4/slowEvery+0.5) * slowEvery
	if m.historyEvery == 0 {
		m.historyEvery = slowEvery
	}
	m.setStep(int(m.plan.step.at(0)), true)
	m.orders()
	for _, t := range m.throws {
		t.place(m)
	}
	return m, nil
}

// stream is one random stream of the seed. Every use has its own, so that one more channel changes no other.
func stream(seed, use uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 0x6c617077696e67+use)) }

// Info describes the machine as a source.
func (m *Machine) Info() acq.Info {
	return acq.Info{Rate: m.rate, Channels: m.inputs, Bits: m.bits, Name: "model of " + m.sk.ID}
}

// Samples gives how many samples have been given so far.
func (m *Machine) Samples() int64 { return m.n }

// Fill gives the next n samples of all inputs in b, reusing its slices.
func (m *Machine) Fill(b *acq.Block, n int) {
	b.Seq0, b.N, b.Lost, b.Clip, b.Note = m.n, n, 0, false, ""
	if cap(b.Counts) < m.inputs {
		b.Counts = make([][]int32, m.inputs)
	}
	b.Counts = b.Counts[:m.inputs]
	for i := range b.Counts {
		if cap(b.Counts[i]) < n {
			b.Counts[i] = make([]int32, n)
		}
		b.Counts[i] = b.Counts[i][:n]
		clear(b.Counts[i])
	}
	for i := range n {
		m.sample()
		for _, c := range m.chans {
			code, clipped := c.convert(m)
			b.Counts[c.input][i] = code
			if clipped && !b.Clip {
				b.Clip, b.Note = true, "converter overload on "+c.id
			}
		}
		for k := range m.swaps {
			m.swaps[k].apply(b, i)
		}
	}
}

// sample moves the machine to the instant of the next sample.
func (m *Machine) sample() {
	if m.n%slowEvery == 0 {
		m.slow()
	}
	// The state is that of sample m.n; the outputs are read from it before the machine moves on by one interval.
	if m.n > 0 {
		m.advance()
	}
	m.n++
	if m.mark != nil {
		m.mark.read(m)
	}
	if m.once != nil {
		m.once.read(m)
	}
	for _, t := range m.throws {
		t.shake(m)
	}
}

// advance turns the shaft by one sampling interval and lets every end follow.
func (m *Machine) advance() {
	w := m.omega
	f := 1.0
	for _, h := range m.ripple {
		f += h.a*m.cosN[h.order] + h.b*m.sinN[h.order]
	}
	// Midpoint rule: the ripple is read half an interval ahead to first order.
	half := 0.5 * w * f * m.dt
	g := 1.0
	for _, h := range m.ripple {
		o := float64(h.order) * half
		g += h.a*(m.cosN[h.order]-o*m.sinN[h.order]) + h.b*(m.sinN[h.order]+o*m.cosN[h.order])
	}
	turned := (w + 0.5*m.dOm) * g * m.dt
	m.omega += m.dOm
	before := m.angle()
	m.theta += turned
	if m.theta >= 2*math.Pi {
		m.theta -= 2 * math.Pi
		m.rev++
	}
	m.orders()
	for _, s := range m.stages {
		s.move()
	}
	turnedDeg := turned * 180 / math.Pi
	for _, t := range m.throws {
		t.advance(m, before, turnedDeg)
	}
}

// angle gives the degrees turned since the mark of turn zero.
func (m *Machine) angle() float64 { return float64(m.rev)*360 + m.theta*180/math.Pi }

// orders fills cos nθ and sin nθ.
func (m *Machine) orders() {
	s, c := math.Sincos(m.theta)
	m.cosN[0], m.sinN[0] = 1, 0
	for i := 1; i <= maxOrder; i++ {
		m.cosN[i] = m.cosN[i-1]*c - m.sinN[i-1]*s
		m.sinN[i] = m.sinN[i-1]*c + m.cosN[i-1]*s
	}
}

// slow follows the script and everything that moves over seconds.
func (m *Machine) slow() {
	t := float64(m.n) * m.dt
	ahead := t + slowEvery*m.dt
	m.dOm = (m.plan.speedAt(ahead)*math.Pi/30 - m.omega) / slowEvery
	for i, s := range m.stages {
		l := m.recycled(i, ahead)
		s.aim(l)
		s.follow(m, l, ahead)
	}
	if st := int(m.plan.step.at(t)); st != m.step {
		m.setStep(st, false)
	}
	for _, th := range m.throws {
		th.slow(m, t)
	}
	for _, c := range m.chans {
		c.slow(m, t)
	}
	if m.mark != nil {
		m.mark.faults.slow(m, t)
	}
	for i := range m.swaps {
		m.swaps[i].on = m.swaps[i].track.at(t) > 0.5
	}
	if len(m.truths) > truthsKept {
		m.truths = append([]Truth(nil), m.truths[truthsKept/2:]...)
	}
	if m.n%m.historyEvery == 0 {
		if len(m.history) == historyKept {
			m.forgotten += historyKept / 2
			m.history = append(m.history[:0], m.history[historyKept/2:]...)
		}
		m.history = append(m.history, m.reading(t))
	}
}

// setStep puts a load step in force: pockets, unloaders, late closing.
func (m *Machine) setStep(code int, first bool) {
	m.step = code
	var st skid.Step
	for _, s := range m.sk.Steps {
		if s.Code == code {
			st = s
		}
	}
	for _, t := range m.throws {
		for _, e := range t.ends {
			if e != nil {
				e.load(st, first)
			}
		}
	}
}

// Truths gives the truths completed since the last call, in the order of their completion; the caller owns them. Of those never
// asked for, only the newest some ten thousand are kept.
func (m *Machine) Truths() []Truth {
	out := m.truths
	m.truths = nil
	return out
}

// Process gives the process values as an operator's system knows them at t seconds: the newest reading (four a second) at or
// before t. Beyond what has been computed it gives the newest; readings older than about a quarter of an hour are
// forgotten and the oldest kept stands for them.
func (m *Machine) Process(t float64) skid.Process {
	if len(m.history) == 0 {
		return skid.Process{}
	}
	i := int(math.Floor(t / (float64(m.historyEvery) * m.dt)))
	i = max(0, min(i-m.forgotten, len(m.history)-1))
	return m.history[i]
}
