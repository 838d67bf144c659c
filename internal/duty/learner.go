package duty

import (
	"fmt"
	"math"
	"slices"

	"lapwing/internal/measure"
)

// LearnConfig says what a learning run must hold. Zero values take the defaults.
type LearnConfig struct {
	Steps    []int // load steps that ought to be learnt, for Coverage
	Throws   int   // for Coverage
	Want     int   // turns per load step that a full baseline wants; default 600
	MinTurns int   // turns without which a load step is not learnt at all; default 45
	MaxTurns int   // turns kept per cell, above it every other run of turns is dropped; default 6000

	NoWork func(throw, step int) bool // load steps at which a throw does no work and has nothing to learn; nil: none
}

// Learner collects turns that a person has declared healthy. Only steady turns count.
type Learner struct {
	cfg          LearnConfig
	layout       measure.Layout
	cells        []*lesson
	turn0, turn1 int64
	any          bool
	over         *Baseline // what the run changes; nil: it begins from nothing
	touched      []int     // of over, the features learnt anew; nil: whole load steps are added
	more         bool      // only load steps that lack some of them
}

// lesson is one cell's turns.
type lesson struct {
	throw, step int
	inferred    bool
	features    []int
	duty        [][numVars]float64
	turn        []int64
	values      [][]float64 // per turn, aligned to features
	seen        int         // steady turns offered
	stride      int         // of runs kept
	total       int         // turns offered, for the stride
}

// runTurns is the length of a run of turns that is kept, dropped or held out together: three evidence blocks.
const runTurns = 45

// NewLearner begins a learning run.
func NewLearner(layout measure.Layout, cfg LearnConfig) *Learner {
	if cfg.Want <= 0 {
		cfg.Want = 600
	}
	if cfg.MinTurns <= 0 {
		cfg.MinTurns = 45
	}
	if cfg.MaxTurns <= 0 {
		cfg.MaxTurns = 6000
	}
	return &Learner{cfg: cfg, layout: layout}
}

// NewRenewal begins a run that learns some features of a baseline anew, after work on the machine, and leaves the rest
// of it as it is.
func NewRenewal(layout measure.Layout, cfg LearnConfig, over *Baseline, touched []int) (*Learner, error) {
	l, err := NewAddition(layout, cfg, over)
	if err != nil {
		return nil, err
	}
	l.touched = slices.Clone(touched)
	l.cfg.Steps, l.cfg.Throws = nil, 0 // only what was learnt before can be learnt anew
	return l, nil
}

// NewContinuation goes on with a renewal: it learns the touched features at the load steps that an earlier run has not
// seen, and leaves everything that is there.
func NewContinuation(layout measure.Layout, cfg LearnConfig, over *Baseline, touched []int) (*Learner, error) {
	l, err := NewRenewal(layout, cfg, over, touched)
	if err != nil {
		return nil, err
	}
	l.more = true
	return l, nil
}

// NewAddition begins a run that adds load steps to a baseline which has not seen them, and leaves those that it has.
func NewAddition(layout measure.Layout, cfg LearnConfig, over *Baseline) (*Learner, error) {
	if _, err := over.Reference(layout); err != nil {
		return nil, err
	}
	l := NewLearner(layout, cfg)
	l.over = over
	return l, nil
}

// wants tells whether the run has a use for a throw's load step.
func (l *Learner) wants(throw, step int, inferred bool) bool {
	if l.over == nil {
		return true
	}
	cell := l.over.cell(throw, step, inferred)
	if l.touched == nil {
		return cell == nil
	}
	return cell != nil && slices.ContainsFunc(l.touched, func(f int) bool {
		return l.layout[f].Throw == throw && !(l.more && cell.model(l.layout[f].Subject, l.layout[f].Name) != nil)
	})
}

// Add takes one turn of one throw.
func (l *Learner) Add(throw int, p Point, v *measure.Vector) {
	if p.State != Steady {
		return
	}
	if !l.any || v.Turn < l.turn0 {
		l.turn0 = v.Turn
	}
	if !l.any || v.Turn > l.turn1 {
		l.turn1 = v.Turn
	}
	l.any = true
	if l.wants(throw, p.Step, p.Inferred) {
		l.lesson(throw, p.Step, p.Inferred).add(vars(p.RPM, p.Ps, p.Pd), v, l.cfg.MaxTurns)
	}
	// The same turn as it will look when the process values are gone.
	if !p.Inferred && known(p.OwnPs) && known(p.OwnPd) && p.OwnPs > 0 && p.OwnPd > 0 && l.wants(throw, p.OwnStep, true) {
		l.lesson(throw, p.OwnStep, true).add(vars(p.RPM, p.OwnPs, p.OwnPd), v, l.cfg.MaxTurns)
	}
}

func (l *Learner) lesson(throw, step int, inferred bool) *lesson {
	if c := l.find(throw, step, inferred); c != nil {
		return c
	}
	c := &lesson{throw: throw, step: step, inferred: inferred, stride: 1}
	for i, f := range l.layout {
		if f.Throw == throw && !f.Display {
			c.features = append(c.features, i)
		}
	}
	l.cells = append(l.cells, c)
	return c
}

func (c *lesson) add(duty [numVars]float64, v *measure.Vector, most int) {
	for _, x := range duty {
		if !known(x) {
			return
		}
	}
	c.seen++
	keep := (c.total/runTurns)%c.stride == 0
	c.total++
	if !keep {
		return
	}
	vals := make([]float64, len(c.features))
	for i, f := range c.features {
		vals[i] = math.NaN()
		if f < len(v.V) && known(v.V[f]) {
			vals[i] = v.V[f]
		}
	}
	c.duty, c.turn, c.values = append(c.duty, duty), append(c.turn, v.Turn), append(c.values, vals)
	if len(c.turn) >= most {
		c.thin()
	}
}

// thin drops every other run of turns, so that neighbours stay neighbours.
func (c *lesson) thin() {
	k := 0
	for i := range c.turn {
		if (i/runTurns)%2 == 0 {
			c.duty[k], c.turn[k], c.values[k] = c.duty[i], c.turn[i], c.values[i]
			k++
		}
	}
	c.duty, c.turn, c.values = c.duty[:k], c.turn[:k], c.values[:k]
	c.stride *= 2
}

// Coverage is how far one throw's load step has been learnt.
type Coverage struct {
	Throw, Step  int
	Inferred     bool
	Turns, Want  int
	Ratio        [2]float64 // lowest and highest, 2-98 %
	RPM          [2]float64
	Ps           [2]float64 // Pa
	Missing      string     // in plain words; empty when there is enough
	MeetsMinimum bool       // enough to be used at all
}

// Coverage tells what has been learnt and what is missing: first the expected steps, then others that turned up.
func (l *Learner) Coverage() []Coverage {
	var out []Coverage
	done := map[*lesson]bool{}
	add := func(c *lesson) {
		cv := Coverage{Throw: c.throw, Step: c.step, Inferred: c.inferred, Turns: c.seen, Want: l.cfg.Want, MeetsMinimum: len(c.turn) >= l.cfg.MinTurns}
		if len(c.duty) > 0 {
			r := func(v int) [2]float64 {
				col := make([]float64, len(c.duty))
				for i := range col {
					col[i] = c.duty[i][v]
				}
				slices.Sort(col)
				return [2]float64{quantile(col, 0.02), quantile(col, 0.98)}
			}
			a, p := r(0), r(2)
			cv.Ratio, cv.RPM, cv.Ps = [2]float64{math.Exp(a[0]), math.Exp(a[1])}, r(1), [2]float64{math.Exp(p[0]), math.Exp(p[1])}
		}
		if n := l.cfg.Want - c.seen; n > 0 {
			cv.Missing = fmt.Sprintf("%d more steady turns", n)
		} else if cv.Ratio[1] < cv.Ratio[0]*1.04 {
			cv.Missing = "only one pressure ratio: other ratios will not be judged"
		}
		out = append(out, cv)
		done[c] = true
	}
	none := func(t, s int) {
		out = append(out, Coverage{Throw: t, Step: s, Want: l.cfg.Want, Missing: fmt.Sprintf("%d steady turns: this load step has not been run", l.cfg.Want)})
	}
	if l.over != nil && l.touched != nil {
		for i := range l.over.Cells {
			if c := &l.over.Cells[i]; !c.Inferred && l.wants(c.Throw, c.Step, false) && l.find(c.Throw, c.Step, false) == nil {
				none(c.Throw, c.Step)
			}
		}
	}
	for t := range l.cfg.Throws {
		for _, s := range l.cfg.Steps {
			if l.cfg.NoWork != nil && l.cfg.NoWork(t, s) || !l.wants(t, s, false) {
				continue
			}
			found := false
			for _, c := range l.cells {
				if c.throw == t && c.step == s && !done[c] {
					add(c)
					found = true
				}
			}
			if !found {
				none(t, s)
			}
		}
	}
	for _, c := range l.cells {
		if !done[c] {
			add(c)
		}
	}
	return out
}

// Fit makes the baseline. Load steps with too few turns are left out; none at all is an error.
func (l *Learner) Fit(h Header) (*Baseline, error) {
	if h.Turn0 == 0 && h.Turn1 == 0 {
		h.Turn0, h.Turn1 = l.turn0, l.turn1
	}
	b := &Baseline{Version: baselineVersion, LayoutHash: layoutHash(l.layout), Header: h, Cells: []Cell{}}
	most, enough := 0, 0
	for _, c := range l.cells {
		if most = max(most, len(c.turn)); len(c.turn) >= l.cfg.MinTurns {
			enough++
		}
	}
	if enough == 0 {
		return nil, fmt.Errorf("duty: learn: %d steady turns at the most in one load step, at least %d are needed", most, l.cfg.MinTurns)
	}
	if l.over != nil {
		drop := l.touched
		if l.more {
			drop = nil
		}
		b.Cells = l.over.Without(l.layout, drop).Cells
	}
	if l.touched != nil {
		if err := l.renew(b); err != nil {
			return nil, fmt.Errorf("duty: learn anew: %w", err)
		}
		return b, nil
	}
	for _, c := range l.cells {
		if len(c.turn) < l.cfg.MinTurns {
			continue
		}
		cell, err := c.fit(l.layout)
		if err != nil {
			return nil, fmt.Errorf("duty: learn throw %d, load step %d: %w", c.throw, c.step, err)
		}
		b.Cells = append(b.Cells, cell)
	}
	slices.SortStableFunc(b.Cells, func(x, y Cell) int {
		if x.Throw != y.Throw {
			return x.Throw - y.Throw
		}
		return x.Step - y.Step
	})
	return b, nil
}

func (c *lesson) fit(layout measure.Layout) (Cell, error) {
	cell := Cell{Throw: c.throw, Step: c.step, Inferred: c.inferred, Turns: c.seen, Shape: shapeOf(c.duty), Models: []Model{}}
	x := make([][numTerms]float64, len(c.duty))
	var all normal
	for i, d := range c.duty {
		x[i] = cell.Shape.row(d)
		all.add(&x[i], 0, 1)
	}
	var err error
	if cell.Inverse, err = all.inverse(); err != nil {
		return cell, err
	}
	lev := make([]float64, len(x))
	for i := range x {
		lev[i] = leverage(&cell.Inverse, &x[i])
	}
	slices.Sort(lev)
	cell.MaxLev = 1.5 * quantile(lev, 0.995)

	for k, f := range c.features {
		m, ok, err := c.fitFeature(layout[f], k, x, nil)
		if err != nil {
			return cell, fmt.Errorf("%s %s: %w", layout[f].Subject, layout[f].Name, err)
		}
		if ok {
			cell.Models = append(cell.Models, m)
		}
	}
	return cell, nil
}

// fitFeature fits one feature on the turns that had it. ok is false when those are too few. With a prior the change from
// it is fitted: terms that the turns do not bear stay the prior's.
func (c *lesson) fitFeature(f measure.Feature, k int, x [][numTerms]float64, prior *Model) (m Model, ok bool, err error) {
	var idx []int
	for i := range c.values {
		if known(c.values[i][k]) {
			idx = append(idx, i)
		}
	}
	if len(idx) < 30 {
		return m, false, nil
	}
	m = Model{Subject: f.Subject, Name: f.Name, Turns: len(idx)}
	own := make([][numVars]float64, len(idx))
	for j, i := range idx {
		own[j] = c.duty[i]
	}
	sh := shapeOf(own)
	m.Lo, m.Hi = sh.Lo, sh.Hi
	xs := make([][numTerms]float64, len(idx))
	ys, raw := make([]float64, len(idx)), make([]float64, len(idx))
	for j, i := range idx {
		xs[j], raw[j] = x[i], c.values[i][k]
		if ys[j] = raw[j]; prior != nil {
			ys[j] -= dot(&prior.Coef, &xs[j])
		}
		for t := range xs[j] {
			if !sh.On[t] || f.Flat && t > 0 { // a feature that comes and goes bears fewer terms than its cell
				xs[j][t] = 0
			}
		}
	}
	var w []float64
	if m.Coef, w, m.Spread, err = robust(xs, ys); err != nil {
		return m, false, err
	}
	res := make([]float64, len(ys))
	for j := range ys {
		res[j] = ys[j] - dot(&m.Coef, &xs[j])
	}
	turns := make([]int64, len(idx))
	for j, i := range idx {
		turns[j] = c.turn[i]
	}
	m.Lag1 = lag1(res, turns, m.Spread)
	m.Sys = math.Max(heldOut(xs, ys, w, &m), sysFloor(f, median(raw)))
	if prior != nil {
		for t := range m.Coef {
			m.Coef[t] += prior.Coef[t]
		}
	}
	if m.Sys <= 0 { // a feature that is always exactly zero
		m.Sys = 1e-12
	}
	return m, true, nil
}

// lag1 is the correlation of neighbouring turns' residuals, outliers clipped at three spreads.
func lag1(res []float64, turn []int64, spread float64) float64 {
	clip := func(v float64) float64 { return math.Max(-3*spread, math.Min(3*spread, v)) }
	var num, den float64
	for i := 1; i < len(res); i++ {
		if turn[i]-turn[i-1] != 1 {
			continue
		}
		a, b := clip(res[i-1]), clip(res[i])
		num += a * b
		den += (a*a + b*b) / 2
	}
	if den == 0 {
		return 0
	}
	return math.Max(0, math.Min(0.9, num/den))
}

// heldOut measures what averaging does not remove: runs of turns are predicted from a fit without them (five folds,
// the robust weights kept), their block medians compared with the spread that independent noise would leave.
func heldOut(x [][numTerms]float64, y, w []float64, m *Model) float64 {
	const folds, block = 5, 15
	if len(y) < 2*folds*block {
		return 0
	}
	var all normal
	var part [folds]normal
	for i := range y {
		f := (i / runTurns) % folds
		part[f].add(&x[i], y[i], w[i])
		all.add(&x[i], y[i], w[i])
	}
	var med []float64
	var res [block]float64
	for f := range folds {
		rest := all.sub(&part[f])
		if rest.w < 0.3*all.w {
			continue
		}
		c, err := rest.solve()
		if err != nil {
			continue
		}
		for i := 0; i+block <= len(y); i += block {
			if (i/runTurns)%folds != f {
				continue
			}
			for j := range block {
				res[j] = y[i+j] - dot(&c, &x[i+j])
			}
			med = append(med, median(res[:]))
		}
	}
	if len(med) < 8 {
		return 0
	}
	for i, v := range med {
		med[i] = math.Abs(v)
	}
	slices.Sort(med)
	// The larger of what the middle and what the tail of the blocks say.
	sd := math.Max(1.4826*quantile(med, 0.5), quantile(med, 0.95)/1.96)
	white := 1.57 * m.Spread * m.Spread / block * (1 + m.Lag1) / (1 - m.Lag1)
	return math.Sqrt(math.Max(0, sd*sd-white))
}

// median of x; x is sorted by it.
func median(x []float64) float64 {
	slices.Sort(x)
	return quantile(x, 0.5)
}
