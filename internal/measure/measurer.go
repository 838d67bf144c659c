package measure

import (
	"math"

	"gonum.org/v1/gonum/dsp/fourier"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
	"lapwing/internal/leak"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// Config is what the measures need of the machine beforehand.
type Config struct {
	Machine    Machine
	Atmosphere float64       // Pa absolute on the outside of the rods; not positive: 101325
	Leak       leak.Settings // zero: defaults

	// Do, where given, calls f with 0 to n-1, each once, and returns when all have come back; several may run at the
	// same time. The leak fits of the throws are made by it, with the same bits whatever the order. Nil: a plain loop.
	Do func(n int, f func(i int))
}

// Input is what the measures are told about one throw for one turn.
type Input struct {
	Cylinder       crank.Cylinder // with the open pocket in it
	LinePs, LinePd float64        // Pa absolute, NaN unknown
	Ts, Td         float64        // K, line temperatures, NaN unknown
	Gas            Gas
	Covers         map[string]float64 // K, cover temperature by valve id; looked up only
}

// Measurer computes the features of one machine. It keeps scratch and is not safe for concurrent use.
type Measurer struct {
	cfg     Config
	layout  Layout
	index   []index
	shapes  []shape
	fitters []*leak.Fitter // one a throw: each keeps its cylinder's volumes

	x, y, env    []float64
	loads        crank.Loads
	motions      []crank.Motion // by throw
	masked, busy []bool
	flow         [5][]float64 // by leak path, on the usable degrees

	ctx    []throwCtx
	fitOne func(i int)
	memory []ThrowMemory
	ffts   []*fourier.FFT
	padded []float64
	coeff  []complex128
	spec   spectra
	cells  []float64
	back   []float64
	mix    mix
	pairs  []mixture
	in     takeIn
	tried  []float64
}

// shape caches the volumes of a throw's cylinder on the grid.
type shape struct {
	cyl  crank.Cylinder
	grid turn.Grid
	v    [2][]float64 // m³
}

// New makes a measurer; its layout is that of NewLayout.
func New(cfg Config) *Measurer {
	if !(cfg.Atmosphere > 0) {
		cfg.Atmosphere = 101325
	}
	m := &Measurer{cfg: cfg, shapes: make([]shape, len(cfg.Machine.Throws)), motions: make([]crank.Motion, len(cfg.Machine.Throws))}
	cfg.Leak.Mass = true // the throughput's share needs it
	for range cfg.Machine.Throws {
		m.fitters = append(m.fitters, leak.NewFitter(cfg.Leak))
	}
	m.fitOne = func(i int) {
		if c := &m.ctx[i]; c.th != nil {
			m.leaks(c)
		}
	}
	m.layout, m.index = build(cfg.Machine)
	m.ctx, m.memory = make([]throwCtx, len(cfg.Machine.Throws)), make([]ThrowMemory, len(cfg.Machine.Throws))
	for i := range m.memory {
		m.memory[i].ID = cfg.Machine.Throws[i].ID
	}
	return m
}

// Layout is the fixed list the vectors are aligned to. It must not be changed.
func (m *Measurer) Layout() Layout { return m.layout }

// Reasons for an absent value.
const (
	whyNotReached   = "not measured"
	whyNoInput      = "nothing is known about this throw"
	whyGas          = "gas properties or line temperature not known"
	whyLines        = "line pressures not known"
	whyNoPlateau    = "no plateau pressure"
	whyNotDeliver   = "the end does not deliver"
	whyFewPoints    = "closed stroke too short"
	whyTrapped      = "no compression line: what suction traps is not known"
	whyNoPrediction = "no prediction for a sealed cylinder"
	whyNoDischargeT = "discharge temperature not known"
	whyOtherEnd     = "the other end has no pressure channel"
	whyPartUnknown  = "one end is not known"
	whyThroughput   = "the path's throughput is not known"
	whyTestFit      = "no leak fit"
	whySpeed        = "speed not known"
)

// throwCtx is one throw of one turn, with everything looked up.
type throwCtx struct {
	i      int // the throw's place in the machine
	dst    *Vector
	ix     *index
	th     *turn.Throw
	w      *window.Throw
	in     *Input
	v      [2][]float64
	i0, i1 int // grid points of 0° and 360°
	hz     float64
	heard  [2][window.Events]burst
	usual  []float64 // by accelerometer, see usualBack
}

func (d *Vector) set(i int, x float64) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		d.absent(i, whyNotReached)
		return
	}
	d.V[i], d.Why[i] = x, ""
}

func (d *Vector) absent(i int, why string) { d.V[i], d.Why[i] = math.NaN(), why }

// Measure fills dst with the features of one turn, reusing its slices. w is the tracker's result for the same turn; in
// has one entry per throw. What cannot be known is NaN with a reason in Why.
func (m *Measurer) Measure(dst *Vector, t *turn.Turn, w window.Result, in []Input) {
	n := len(m.layout)
	if cap(dst.V) < n || cap(dst.Why) < n {
		dst.V, dst.Why = make([]float64, n), make([]string, n)
	}
	dst.V, dst.Why = dst.V[:n], dst.Why[:n]
	if cap(dst.Marks) < len(m.index) {
		dst.Marks = make([][2][window.Events]Mark, len(m.index))
	}
	dst.Marks = dst.Marks[:len(m.index)]
	clear(dst.Marks)
	dst.Turn, dst.Seq0, dst.Seq1, dst.Time, dst.RPM = t.Number, t.Seq0, t.Seq1, t.Time, t.RPM
	why := whyNotReached
	if !t.Valid() {
		why = t.Reason
	}
	for i := range dst.V {
		dst.absent(i, why)
	}
	if !t.Valid() {
		return
	}
	m.covers(dst, in)
	for i := range m.ctx {
		m.ctx[i] = throwCtx{usual: m.ctx[i].usual[:0]}
	}
	for i := range m.index {
		if i >= len(t.Throws) || i >= len(in) || i >= len(w.Throws) {
			m.all(dst, i, whyNoInput)
			continue
		}
		th := &t.Throws[i]
		c := &m.ctx[i]
		*c = throwCtx{usual: c.usual, i: i, dst: dst, ix: &m.index[i], th: th, w: &w.Throws[i], in: &in[i], hz: th.RPM / 60}
		c.i0, c.i1 = int(math.Round(th.Grid.Index(0))), int(math.Round(th.Grid.Index(360)))
		if c.i0 < 0 || c.i1 >= th.Grid.N || len(th.Pos) != th.Grid.N || !(c.hz > 0) {
			m.all(dst, i, whySpeed)
			c.th = nil
			continue
		}
		c.v = m.volumes(i, &in[i].Cylinder, th.Grid)
		for e := range c.v {
			m.end(c, e)
		}
		m.loadsOf(c)
		m.sums(c)
		m.listenAll(c)
	}
	if m.cfg.Do != nil {
		m.cfg.Do(len(m.ctx), m.fitOne)
	} else {
		for i := range m.ctx {
			m.fitOne(i)
		}
	}
	for i := range m.ctx { // every throw has been heard: what rings across is known
		if c := &m.ctx[i]; c.th != nil {
			m.results(c)
			m.events(c)
			m.noise(c, t, w, i)
		}
	}
}

// all gives every feature of a throw the same reason.
func (m *Measurer) all(dst *Vector, throw int, why string) {
	for i := range m.layout {
		if m.layout[i].Throw == throw && m.layout[i].Class != Temperature {
			dst.absent(i, why)
		}
	}
}

func (m *Measurer) volumes(i int, cyl *crank.Cylinder, g turn.Grid) [2][]float64 {
	s := &m.shapes[i]
	if s.v[0] == nil || s.cyl != *cyl || s.grid != g {
		s.cyl, s.grid = *cyl, g
		for e := range s.v {
			s.v[e] = cyl.Volumes(s.v[e], e, g.Lo, g.Step, g.N)
		}
	}
	return s.v
}

// sums adds the ends of a throw up.
func (m *Measurer) sums(c *throwCtx) {
	power, capacity, whyP, whyC := 0.0, 0.0, "", ""
	for e, at := range c.ix.end {
		if at < 0 {
			continue
		}
		if p := c.dst.V[at+ePower]; math.IsNaN(p) {
			whyP = whyPartUnknown
		} else {
			power += p
		}
		switch q := c.dst.V[at+eCapS]; {
		case c.w.Ends[e].State == window.Idle || c.w.Ends[e].State == window.NotDelivering: // draws nothing in
		case math.IsNaN(q):
			whyC = whyPartUnknown
		default:
			capacity += q
		}
	}
	c.sum(tPower, power, whyP)
	c.sum(tCapacity, capacity, whyC)
}

func (c *throwCtx) sum(k int, x float64, why string) {
	if why != "" {
		c.dst.absent(c.ix.throw+k, why)
		return
	}
	c.dst.set(c.ix.throw+k, x)
}

// covers takes the cover temperatures and compares each with the middle of the others of its kind in its stage.
func (m *Measurer) covers(dst *Vector, in []Input) {
	for i := range m.index {
		for _, c := range m.index[i].covers {
			own, ok := temperature(in, i, c.id)
			if !ok {
				dst.absent(c.at+cCover, "cover temperature not known")
				dst.absent(c.at+cAbove, "cover temperature not known")
				continue
			}
			dst.set(c.at+cCover, own)
			m.x = m.x[:0]
			for j := range m.index {
				for _, o := range m.index[j].covers {
					if o.id == c.id || o.stage != c.stage || o.discharge != c.discharge {
						continue
					}
					if v, ok := temperature(in, j, o.id); ok {
						m.x = append(m.x, v)
					}
				}
			}
			if len(m.x) == 0 {
				dst.absent(c.at+cAbove, "no other valve of its kind with a known cover temperature")
				continue
			}
			dst.set(c.at+cAbove, own-dsp.MedianInPlace(m.x))
		}
	}
}

func temperature(in []Input, throw int, id string) (float64, bool) {
	if throw >= len(in) {
		return 0, false
	}
	v, ok := in[throw].Covers[id]
	return v, ok && v > 0 && !math.IsInf(v, 0)
}
