package turn

import (
	"math"

	"lapwing/internal/dsp"
)

// angleMap is time as a function of shaft angle over four revolutions: from the mark before the revolution in hand
// to the mark that closes the second one after it. Angles are degrees after the mark that opens the revolution in
// hand, -360..1080; times are sample positions relative to a reference sample, so that they stay precise however
// long the source has run.
type angleMap struct {
	marks  Marks    // Inner
	ripple []Ripple // in force for the revolution in hand
	curve  dsp.Curve
	deg    []float64 // φ of the knots
	pos    []float64 // their sample positions after ref
	ref    int64
	inTurn int     // marks per revolution, lost ones among them
	gap    float64 // degrees, the widest stretch without a mark
}

// warp gives φ(θ) and dφ/dθ.
func warp(ripple []Ripple, deg float64) (phi, slope float64) {
	phi, slope = deg, 1
	for _, r := range ripple {
		n := float64(r.Order)
		sin, cos := math.Sincos((n*deg - r.PhaseDeg) * math.Pi / 180)
		phi -= r.Amp / n * sin * 180 / math.Pi
		slope -= r.Amp * cos
	}
	return phi, slope
}

// lay puts the curve through the marks of consecutive revolutions, the second of which is the one in hand. It
// returns why it cannot, or "".
func (m *angleMap) lay(recs []*record) string {
	m.deg, m.pos = m.deg[:0], m.pos[:0]
	m.ref = int64(math.Floor(recs[0].mark0)) // of the marks, not of the blocks: the bits must not depend on how frames overlap
	m.inTurn = len(recs[0].inner) + 1
	m.gap = 0
	last := -360.0
	if m.marks.Inner != nil && len(m.marks.Inner)+1 != m.inTurn {
		return "phase: number of marks in a turn is not the one configured"
	}
	for j, r := range recs {
		if len(r.inner)+1 != m.inTurn {
			return "phase: number of marks in a turn changed"
		}
		turn := 360 * float64(j-1)
		m.gap, last = max(m.gap, turn-last), turn
		m.add(turn, r.mark0)
		for i, pos := range r.inner {
			if math.IsNaN(pos) { // a lost tooth: the spline bridges it
				continue
			}
			at := 360 * float64(i+1) / float64(m.inTurn)
			if m.marks.Inner != nil {
				at = m.marks.Inner[i]
			}
			m.gap, last = max(m.gap, turn+at-last), turn+at
			m.add(turn+at, pos)
		}
	}
	m.gap = max(m.gap, 360*float64(len(recs)-1)-last)
	m.add(360*float64(len(recs)-1), recs[len(recs)-1].mark1)
	if err := m.curve.FitSpline(m.deg, m.pos); err != nil {
		return "phase: marks out of order"
	}
	return ""
}

// even gives how many evenly spaced marks a turn would leave no wider gap: what the uncertainty goes by.
func (m *angleMap) even() int { return int(360/m.gap + 1e-9) }

func (m *angleMap) add(deg, pos float64) {
	phi, _ := warp(m.ripple, deg)
	m.deg = append(m.deg, phi)
	m.pos = append(m.pos, pos-float64(m.ref))
}

// grid is one throw's angle grid with φ and dφ/dθ worked out: they change only with the ripple.
type grid struct {
	Grid
	dead       float64 // degrees from the mark to the throw's dead centre
	phi, slope []float64
	zero, full int // indices of 0° and 360°
}

func newGrid(c *Config, deadCentre float64) grid {
	n := int(math.Round((360 + 2*PadDeg) / c.Step))
	g := grid{Grid: Grid{Lo: -PadDeg, Step: c.Step, N: n + 1}, zero: int(math.Round(PadDeg / c.Step))}
	g.full = n - g.zero
	g.phi, g.slope = make([]float64, n+1), make([]float64, n+1)
	g.dead = deadCentre
	g.warp(c.Marks.Ripple)
	return g
}

func (g *grid) warp(ripple []Ripple) {
	for i := range g.phi {
		g.phi[i], g.slope[i] = warp(ripple, g.dead+g.At(i))
	}
}

// walk fills in the positions (relative to ref) and samples per degree of all grid angles. It returns why it
// cannot, or "".
func (m *angleMap) walk(g *grid, pos, perDeg []float64) string {
	hint := 0
	last := math.Inf(-1)
	for i := range pos {
		p, d := m.curve.At(g.phi[i], &hint)
		d *= g.slope[i]
		if !(p > last) || !(d > 0) {
			return "phase: the marks do not give an increasing angle"
		}
		pos[i], perDeg[i], last = p, d, p
	}
	return ""
}
