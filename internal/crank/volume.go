package crank

import "math"

// Area is the piston area that gas of one end presses on, m². The piston rod takes its share from the crank end, a
// tail rod from the head end.
func (c Cylinder) Area(end int) float64 {
	rod := c.TailRod
	if end == CE {
		rod = c.PistonRod
	}
	return math.Pi / 4 * (c.Bore*c.Bore - rod*rod)
}

// Swept is the swept volume of one end, m³.
func (c Cylinder) Swept(end int) float64 { return c.Area(end) * c.Stroke }

// ClearanceVolume is the clearance volume of one end, m³, open pockets included.
func (c Cylinder) ClearanceVolume(end int) float64 { return c.Clearance[end] * c.Swept(end) }

// Volume is the gas volume of one end, m³.
func (c Cylinder) Volume(end int, deg float64) float64 {
	x := c.Travel(deg)
	if end == CE {
		x = c.Stroke - x
	}
	return c.ClearanceVolume(end) + c.Area(end)*x
}

// DVolume is dV/dθ of one end, m³ per radian of crank rotation.
func (c Cylinder) DVolume(end int, deg float64) float64 {
	d1, _ := c.slope(deg)
	if end == CE {
		d1 = -d1
	}
	return c.Area(end) * d1
}

// Volumes fills dst[0:n] with the volume of one end at lo, lo+step, … degrees (m³) and returns it; dst is grown only
// when it is too short. Fill it once per load step: a turn then costs nothing.
func (c Cylinder) Volumes(dst []float64, end int, lo, step float64, n int) []float64 {
	return fill(dst, lo, step, n, func(deg float64) float64 { return c.Volume(end, deg) })
}

// DVolumes does the same for dV/dθ, m³/rad.
func (c Cylinder) DVolumes(dst []float64, end int, lo, step float64, n int) []float64 {
	return fill(dst, lo, step, n, func(deg float64) float64 { return c.DVolume(end, deg) })
}

func fill(dst []float64, lo, step float64, n int, f func(deg float64) float64) []float64 {
	if cap(dst) < n {
		dst = make([]float64, n)
	}
	dst = dst[:n]
	for i := range dst {
		dst[i] = f(lo + float64(i)*step)
	}
	return dst
}

// AngleOf is the angle in [0, 360) at which an end has the given volume (m³): on its compression stroke when
// compressing, else on its expansion stroke. The head end compresses from 180° to 360°, the crank end from 0° to 180°.
// A volume beyond a dead centre gives that dead centre; NaN gives NaN.
//
// The inverse is closed: with s = l + r − x the distance from shaft to crosshead pin, the cosine rule of the triangle
// gives tan²(θ/2) = x(2l − x) / ((2r − x)(2l + 2r − x)), which stays sharp at both dead centres.
func (c Cylinder) AngleOf(end int, volume float64, compressing bool) float64 {
	x := (volume - c.ClearanceVolume(end)) / c.Area(end)
	if end == CE {
		x = c.Stroke - x
	}
	if math.IsNaN(x) {
		return math.NaN()
	}
	r, l := c.Radius(), c.ConRod
	x = min(max(x, 0), c.Stroke)
	deg := 2 / radPerDeg * math.Atan2(math.Sqrt(x*(2*l-x)), math.Sqrt((2*r-x)*(2*l+2*r-x)))
	if (end == HE) != compressing {
		return deg // travelling from the head end to the crank
	}
	if deg == 0 {
		return 0
	}
	return 360 - deg
}
