package crank

// End names a cylinder end; it indexes every [2]-array in the project.
const (
	HE = 0 // head end: least volume at 0°
	CE = 1 // crank end: least volume at 180°
)

// Cylinder is one double- or single-acting cylinder on its throw. SI units.
// Clearance holds each end's clearance volume as a fraction of that end's own swept volume, with whatever pocket
// is open at the moment already in it: a load step gives another Cylinder.
type Cylinder struct {
	Bore, Stroke  float64    // m
	ConRod        float64    // m, connecting rod between centres
	PistonRod     float64    // m, diameter
	TailRod       float64    // m, diameter, 0 where there is none
	Clearance     [2]float64 // fraction of swept volume, HE and CE
	MassPiston    float64    // kg, piston with rod, nuts and rings
	MassCrosshead float64    // kg, crosshead with its pin
}
