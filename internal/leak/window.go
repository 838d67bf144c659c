package leak

import (
	"fmt"
	"math"

	"lapwing/internal/crank"
)

// stroke is one closed stroke inside its window.
type stroke struct {
	end, kind int
	Range
}

// check refuses what no fit can be made from.
func (in *Input) check() error {
	n := 0
	for end, p := range in.P {
		if p == nil {
			continue
		}
		if n == 0 {
			n = len(p)
		}
		if len(p) != n || len(in.V[end]) != n {
			return fmt.Errorf("leak: the %s has %d pressures and %d volumes on a grid of %d", endName(end), len(p), len(in.V[end]), n)
		}
	}
	switch {
	case n == 0:
		return fmt.Errorf("leak: no pressure")
	case !(in.Step > 0):
		return fmt.Errorf("leak: the grid's step is %g", in.Step)
	case len(in.Omega) != 1 && len(in.Omega) != n:
		return fmt.Errorf("leak: %d speeds for a grid of %d", len(in.Omega), n)
	case !(in.Ps > 0 && in.Pd > in.Ps && in.Ts > 0 && in.Td > 0):
		return fmt.Errorf("leak: line conditions not usable (Ps %g Pa, Pd %g Pa, Ts %g K, Td %g K)", in.Ps, in.Pd, in.Ts, in.Td)
	case !(in.K > 1 && in.RZ > 0):
		return fmt.Errorf("leak: gas not usable (k %g, RZ %g J/(kg K))", in.K, in.RZ)
	}
	for _, w := range in.Omega {
		if !(w > 0) {
			return fmt.Errorf("leak: shaft speed %g rad/s", w)
		}
	}
	return nil
}

func (in *Input) omega(i int) float64 {
	if len(in.Omega) == 1 {
		return in.Omega[0]
	}
	return in.Omega[i]
}

func (in *Input) deg(i int) float64 { return in.Lo + float64(i)*in.Step }

// compressing reports whether an end's volume falls at an angle.
func compressing(end int, deg float64) bool {
	half := math.Mod(deg, 360)
	if half < 0 {
		half += 360
	}
	return (end == crank.HE) == (half >= 180)
}

// pastDeadCentre gives the degrees since the dead centre before an angle.
func pastDeadCentre(deg float64) float64 {
	d := math.Mod(deg, 180)
	if d < 0 {
		d += 180
	}
	return d
}

// window narrows a closed run to the part that the fit uses. It is empty when too little is left.
func (in *Input) window(set Settings, end, kind int) (stroke, bool) {
	p := in.P[end]
	r := in.Closed[end][kind]
	r.From, r.To = max(r.From, 0), min(r.To, len(p))
	low := set.Low
	if kind == Compression && in.Late[end] {
		low = set.LowLate
	}
	span := math.Log(in.Pd / in.Ps)
	inside := func(i int) bool {
		deg := in.deg(i)
		share := math.Log(p[i]/in.Ps) / span // NaN for a NaN or negative pressure: outside
		return share >= low && share <= set.High && pastDeadCentre(deg) >= set.PastDeadDC &&
			compressing(end, deg) == (kind == Compression)
	}
	for r.From < r.To && !inside(r.From) {
		r.From++
	}
	for r.To > r.From && !inside(r.To-1) {
		r.To--
	}
	other := in.P[1-end] // its pressure drives the rings
	for i := r.From; i < r.To; i++ {
		if !usable(p[i]) || (other != nil && !usable(other[i])) {
			return stroke{}, false
		}
	}
	return stroke{end, kind, r}, r.To-r.From >= set.LeastPts
}

func usable(p float64) bool { return p > 0 && !math.IsInf(p, 0) }

func endName(end int) string {
	if end == crank.CE {
		return "crank end"
	}
	return "head end"
}
