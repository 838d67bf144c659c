package duty

import (
	"math"
	"slices"

	"lapwing/internal/measure"
)

// BlockConfig sets the size of the evidence. Zero values take the defaults.
type BlockConfig struct {
	Turns    int // usable turns per block; default 15
	Spacing  int // take every n-th usable turn; default 1
	MinValid int // turns a feature needs in a block; default half of Turns, rounded up
	MaxSpan  int // turns from first to last above which a block is stale and begun anew; default 20·Turns·Spacing
	Slow     int // settled blocks whose median is one step of the slow test; default 8
}

// Blocks gathers turns at seen duty into blocks, per throw.
type Blocks struct {
	cfg    BlockConfig
	ref    *Reference
	throws map[int]*gather
}

type gather struct {
	first, last          int64
	seq0, seq1           int64
	time                 float64
	n, skip              int
	settled              bool
	point                Point
	rpm, ps, pd          []float64
	value, expected, res map[int][]float64 // by feature
	drift                map[int]*Cusum
	slow                 map[int][]float64 // Z of settled blocks since the slow test's last step
}

// NewBlocks gathers against a reference.
func NewBlocks(ref *Reference, cfg BlockConfig) *Blocks {
	if cfg.Turns <= 0 {
		cfg.Turns = 15
	}
	if cfg.Spacing <= 0 {
		cfg.Spacing = 1
	}
	if cfg.MinValid <= 0 {
		cfg.MinValid = (cfg.Turns + 1) / 2
	}
	if cfg.MaxSpan <= 0 {
		cfg.MaxSpan = 20 * cfg.Turns * cfg.Spacing
	}
	if cfg.Slow <= 0 {
		cfg.Slow = 8
	}
	return &Blocks{cfg: cfg, ref: ref, throws: map[int]*gather{}}
}

// SlowTest is the state of one feature's slow test, to be carried over a restart or a change of baseline.
type SlowTest struct {
	Throw   int     `json:"throw"`
	Subject string  `json:"subject"`
	Name    string  `json:"name"`
	Up      float64 `json:"up"`
	Down    float64 `json:"down"`
}

// SlowTests gives the slow tests that have anything to remember, by throw and in layout order.
func (b *Blocks) SlowTests() (out []SlowTest) {
	for i, f := range b.ref.layout {
		if g := b.throws[f.Throw]; g != nil && g.drift[i] != nil && *g.drift[i] != (Cusum{}) {
			out = append(out, SlowTest{f.Throw, f.Subject, f.Name, g.drift[i].Up, g.drift[i].Down})
		}
	}
	return out
}

// Resume takes slow tests back, apart from those that a renewal has touched: these begin anew. What does not belong to
// the layout or is no state of a test is left out.
func (b *Blocks) Resume(tests []SlowTest, touched []int) {
	for _, t := range tests {
		i := b.ref.layout.Find(t.Subject, t.Name)
		ok := func(v float64) bool { return v >= 0 && v <= 2*CusumLimit }
		if i < 0 || b.ref.layout[i].Throw != t.Throw || slices.Contains(touched, i) || !ok(t.Up) || !ok(t.Down) {
			continue
		}
		b.gather(t.Throw).drift[i] = &Cusum{Up: t.Up, Down: t.Down}
	}
}

func (b *Blocks) gather(throw int) *gather {
	g := b.throws[throw]
	if g == nil {
		g = &gather{value: map[int][]float64{}, expected: map[int][]float64{}, res: map[int][]float64{}, drift: map[int]*Cusum{}, slow: map[int][]float64{}}
		b.throws[throw] = g
	}
	return g
}

// Add takes a throw's turn with its deviations; ok tells that a block is complete. Turns that are neither steady nor
// changing, or whose duty was not seen, are passed over. A load step begins a new block.
func (b *Blocks) Add(throw int, p Point, v *measure.Vector, devs []Deviation) (blk Block, ok bool) {
	if p.State != Steady && p.State != Changing {
		return blk, false
	}
	if seen, _ := b.ref.Seen(throw, p); !seen {
		return blk, false
	}
	g := b.gather(throw)
	if g.n > 0 && (p.Step != g.point.Step || p.Inferred != g.point.Inferred || v.Turn-g.first > int64(b.cfg.MaxSpan)) {
		g.clear()
	}
	if g.n > 0 {
		if g.skip++; g.skip < b.cfg.Spacing {
			return blk, false
		}
	}
	g.skip = 0
	if g.n == 0 {
		g.first, g.seq0, g.time, g.settled = v.Turn, v.Seq0, v.Time, true
	}
	g.n++
	g.last, g.seq1, g.point = v.Turn, v.Seq1, p
	g.settled = g.settled && p.State == Steady
	g.rpm, g.ps, g.pd = append(g.rpm, p.RPM), append(g.ps, p.Ps), append(g.pd, p.Pd)
	for _, d := range devs {
		if d.Seen {
			g.value[d.Feature] = append(g.value[d.Feature], d.Value)
			g.expected[d.Feature] = append(g.expected[d.Feature], d.Expected)
			g.res[d.Feature] = append(g.res[d.Feature], d.Residual)
		}
	}
	if g.n < b.cfg.Turns {
		return blk, false
	}
	blk = b.close(throw, g)
	g.clear()
	return blk, true
}

func (b *Blocks) close(throw int, g *gather) Block {
	blk := Block{Throw: throw, Turn0: g.first, Turn1: g.last, Seq0: g.seq0, Seq1: g.seq1, Time: g.time, Settled: g.settled, Point: g.point}
	blk.Point.RPM, blk.Point.Ps, blk.Point.Pd = median(g.rpm), median(g.ps), median(g.pd)
	if !g.settled {
		blk.Point.State = Changing
	}
	for i := range b.ref.layout {
		res := g.res[i]
		if len(res) < b.cfg.MinValid {
			continue
		}
		m := b.ref.modelOf(throw, g.point, i)
		if m == nil {
			continue
		}
		d := Deviation{Feature: i, Value: median(g.value[i]), Expected: median(g.expected[i]), Residual: median(res), N: len(res), Seen: true}
		d.Spread = m.blockSpread(len(res))
		d.Z = d.Residual / d.Spread
		if math.IsNaN(d.Z) {
			continue
		}
		if !late(b.ref.layout[i].Name) {
			d.Drift = b.slowly(g, i, d.Z)
		}
		blk.Dev = append(blk.Dev, d)
	}
	return blk
}

// late tells of a measure that follows the duty by minutes: after a change of duty it stays away from what is expected for
// longer than a slow test can tell from a lasting change.
func late(name string) bool { return name == "cover_c" || name == "t_excess_k" }

// slowly passes a block's deviation to the slow test, which takes the median of some settled blocks at a time: what is
// slow can wait, and such steps are nearer to independent than blocks are.
func (b *Blocks) slowly(g *gather, feature int, z float64) float64 {
	c := g.drift[feature]
	if c == nil {
		c = &Cusum{}
		g.drift[feature] = c
	}
	if !g.settled {
		return c.Share()
	}
	few := append(g.slow[feature], z)
	if len(few) >= b.cfg.Slow {
		c.Step(median(few))
		few = few[:0]
	}
	g.slow[feature] = few
	return c.Share()
}

// clear begins a new block; the slow test goes on.
func (g *gather) clear() {
	g.n, g.skip = 0, 0
	g.rpm, g.ps, g.pd = g.rpm[:0], g.ps[:0], g.pd[:0]
	for i := range g.res {
		g.value[i], g.expected[i], g.res[i] = g.value[i][:0], g.expected[i][:0], g.res[i][:0]
	}
}
