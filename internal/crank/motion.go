// Package crank is the slider-crank: piston travel, cylinder volumes, acceleration, rod load and its reversal.
//
// Needs: a cylinder's geometry (Cylinder), and for the rod load the pressures and the shaft speed over an angle grid.
// Waits: for nothing; every function answers at once from its arguments.
// Emits: volumes, travel, acceleration and loads in SI units; angles are degrees after the throw's head-end dead
// centre. When it cannot: Validate and RodLoads return an error that says what is wrong; AngleOf clamps to the
// nearest dead centre. Nothing here checks the geometry again, so Validate it once.
package crank

import "math"

const radPerDeg = math.Pi / 180

// Radius is the crank radius, m.
func (c Cylinder) Radius() float64 { return c.Stroke / 2 }

// Travel is the piston's distance from its head-end dead centre, m, towards the crank:
// x = r(1 − cos θ) + l(1 − √(1 − (r/l)² sin² θ)), written without the cancellations near the dead centres.
func (c Cylinder) Travel(deg float64) float64 {
	r, l := c.Radius(), c.ConRod
	sin, _ := math.Sincos(deg * radPerDeg)
	half := math.Sin(deg * radPerDeg / 2)
	u := r / l * sin
	u *= u
	return 2*r*half*half + l*u/(1+math.Sqrt(1-u))
}

// slope gives dx/dθ (m/rad) and d²x/dθ² (m/rad²), both exact, θ in degrees. They are the textbook derivatives of
// Travel with q = √(1 − (r/l)² sin² θ):
// x′ = r sin θ (1 + (r/l) cos θ / q),  x″ = r[cos θ + (r/l)(cos 2θ / q + (r/l)² sin² θ cos² θ / q³)].
func (c Cylinder) slope(deg float64) (d1, d2 float64) {
	r := c.Radius()
	k := r / c.ConRod
	sin, cos := math.Sincos(deg * radPerDeg)
	q := math.Sqrt(1 - k*k*sin*sin)
	d1 = r * sin * (1 + k*cos/q)
	d2 = r * (cos + k*((cos*cos-sin*sin)/q+k*k*sin*sin*cos*cos/(q*q*q)))
	return d1, d2
}

// Velocity is the piston's speed towards the crank, m/s, at shaft speed omega (rad/s).
func (c Cylinder) Velocity(deg, omega float64) float64 {
	d1, _ := c.slope(deg)
	return d1 * omega
}

// Accel is the piston's acceleration towards the crank, m/s², at shaft speed omega (rad/s) and angular
// acceleration alpha (rad/s²): x″ω² + x′α.
func (c Cylinder) Accel(deg, omega, alpha float64) float64 {
	d1, d2 := c.slope(deg)
	return d2*omega*omega + d1*alpha
}

// MeanPistonSpeed is 2·stroke·revolutions per second, m/s.
func (c Cylinder) MeanPistonSpeed(rpm float64) float64 { return 2 * c.Stroke * rpm / 60 }
