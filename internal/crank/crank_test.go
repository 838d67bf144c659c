package crank

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// The two machines of the worked examples (shared reference folder, worked/ex1…ex3).
var (
	m1 = Cylinder{Bore: .254, Stroke: .1524, ConRod: .381, PistonRod: .0635, Clearance: [2]float64{.18, .20},
		MassPiston: 80, MassCrosshead: 60}
	m2 = Cylinder{Bore: .400, Stroke: .320, ConRod: .800, PistonRod: .090, Clearance: [2]float64{.14, .16},
		MassPiston: 430, MassCrosshead: 270}
)

func rads(rpm float64) float64 { return rpm * 2 * math.Pi / 60 }

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Max(math.Abs(want), 1e-12)) {
		t.Errorf("%s = %.10g, want %.10g (relative %.1e)", what, got, want, rel)
	}
}

func TestTextbookValues(t *testing.T) {
	// Internal-combustion textbook example 16.1 as found on public web pages: stroke 8.6 cm, rod 17.2 cm, bore 8.6 cm,
	// 3000 rpm, 20° after dead centre, clearance volume 62.5 cm³: x = 0.32 cm, v = 5.71 m/s, V = 81.24 cm³.
	eng := Cylinder{Bore: .086, Stroke: .086, ConRod: .172}
	eng.Clearance[HE] = 62.5e-6 / eng.Swept(HE)
	near(t, "textbook travel", eng.Travel(20), .0032, .01)
	near(t, "textbook speed", eng.Velocity(20, rads(3000)), 5.71, .001)
	near(t, "textbook volume", eng.Volume(HE, 20), 81.24e-6, .0005)
	// Handbook formulas (worked/ex9): displacement π S N (2D² − d²)/(4·1728) of a 10 in × 6 in cylinder with a 2.5 in
	// rod at 900 rpm = 807.937475 m³/h; mean piston speed 2 S N/60 = 4.572 m/s; greatest piston speed of a rod five
	// crank radii long = 1.601950 times the mean, at 79.1001°.
	near(t, "displacement", (m1.Swept(HE)+m1.Swept(CE))*900*60, 807.937475, 1e-8)
	near(t, "mean piston speed", m1.MeanPistonSpeed(900), 4.572, 1e-12)
	near(t, "greatest piston speed", m1.Velocity(79.1001, rads(900))/4.572, 1.601950, 1e-6)
}

func TestWorkedSliderCrank(t *testing.T) {
	// Handbook section 11, example 1 and 2, machine M1.
	for _, v := range []struct{ deg, mm float64 }{{30, 12.1186507}, {60, 43.8585178}, {90, 83.8977632}, {120, 120.058518}, {180, 152.4}, {270, 83.8977632}} {
		near(t, "travel", m1.Travel(v.deg)*1e3, v.mm, 1e-8)
	}
	for _, v := range []struct{ deg, a float64 }{{0, 812.228964}, {50, 412.648255}, {90, -138.162952}, {180, -541.485976}, {250, -336.490536}} {
		near(t, "acceleration", m1.Accel(v.deg, rads(900), 0), v.a, 1e-8)
	}
	near(t, "area HE", m1.Area(HE), 506.70748e-4, 1e-8)
	near(t, "area CE", m1.Area(CE), 475.03826e-4, 1e-8)
	near(t, "swept HE", m1.Swept(HE), 7.722222e-3, 1e-7)
	near(t, "swept CE", m1.Swept(CE), 7.2395831e-3, 1e-7)
	near(t, "clearance CE", m1.ClearanceVolume(CE), 1.4479166e-3, 1e-7)
	// Openings of the ideal cycle: the angle at which each end has the volume V4 (expansion) and V2 (compression).
	for _, v := range []struct {
		c       Cylinder
		end     int
		litre   float64
		comp    bool
		wantDeg float64
	}{
		{m1, HE, 2.812694, false, 46.771665},
		{m1, HE, 4.5031518, true, 286.64097},
		{m1, CE, 2.9298896, false, 238.88554},
		{m1, CE, 4.2932592, true, 96.560961},
		{m2, HE, 10.803064, false, 38.579806},
		{m2, HE, 23.889421, true, 280.90644},
		{m2, CE, 11.721324, false, 229.6443},
		{m2, CE, 23.077914, true, 90.571957},
	} {
		near(t, "angle of volume", v.c.AngleOf(v.end, v.litre*1e-3, v.comp), v.wantDeg, 2e-7)
	}
}

func TestAngularAcceleration(t *testing.T) {
	// With ω = 0 only x′α is left; with x = x(θ(t)) differentiated numerically both terms must be there.
	c, w0, alpha := m1, 90.0, 400.0
	x := func(s float64) float64 { return c.Travel((0.7 + w0*s + alpha*s*s/2) / radPerDeg) }
	h := 1e-4
	num := (x(h) - 2*x(0) + x(-h)) / (h * h)
	near(t, "acceleration while speeding up", c.Accel(0.7/radPerDeg, w0, alpha), num, 1e-4)
}

func TestTailRod(t *testing.T) {
	c := m1
	c.TailRod = c.PistonRod
	if c.Area(HE) != c.Area(CE) {
		t.Errorf("equal rods on both sides, but areas %g and %g", c.Area(HE), c.Area(CE))
	}
	var l Loads
	p := Pressure{Held: 3e6}
	if err := c.RodLoads(&l, nil, p, p, 0, 1, 360, 101325, []float64{0}); err != nil {
		t.Fatal(err)
	}
	near(t, "gas load of a balanced piston", l.Gas[17]+1, 1, 1e-6)
}

func randomCylinder(t *rapid.T) Cylinder {
	bore := rapid.Float64Range(.05, 1).Draw(t, "bore")
	stroke := rapid.Float64Range(.05, .6).Draw(t, "stroke")
	return Cylinder{
		Bore: bore, Stroke: stroke,
		ConRod:    stroke / 2 * rapid.Float64Range(1.05, 8).Draw(t, "l/r"),
		PistonRod: bore * rapid.Float64Range(.1, .6).Draw(t, "rod"),
		TailRod:   bore * rapid.Float64Range(0, .6).Draw(t, "tail"),
		Clearance: [2]float64{rapid.Float64Range(.02, 3).Draw(t, "cHE"), rapid.Float64Range(.02, 3).Draw(t, "cCE")},
	}
}

func TestAngleOfInvertsVolume(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := randomCylinder(t)
		end := rapid.IntRange(0, 1).Draw(t, "end")
		deg := rapid.Float64Range(0, 359.999).Draw(t, "deg")
		comp := (end == HE) == (deg > 180)
		got := c.AngleOf(end, c.Volume(end, deg), comp)
		// The volume itself has rounding; near a dead centre it knows the angle only as its square root.
		tol := 1e-9
		if d := math.Min(math.Mod(deg, 180), 180-math.Mod(deg, 180)); d < 1 {
			tol = 1e-4
		}
		diff := math.Abs(got - deg)
		if diff = math.Min(diff, 360-diff); diff > tol {
			t.Fatalf("AngleOf(Volume(%.12g)) = %.12g", deg, got)
		}
		if got < 0 || got >= 360 {
			t.Fatalf("angle %g outside [0, 360)", got)
		}
	})
}

func TestDVolumeIsTheDerivative(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := randomCylinder(t)
		end := rapid.IntRange(0, 1).Draw(t, "end")
		deg := rapid.Float64Range(-60, 420).Draw(t, "deg")
		const h = .01
		num := (c.Volume(end, deg+h) - c.Volume(end, deg-h)) / (2 * h * radPerDeg)
		if got := c.DVolume(end, deg); math.Abs(got-num) > 2e-5*c.Swept(end) {
			t.Fatalf("dV/dθ at %g° = %g, numerically %g", deg, got, num)
		}
	})
}

func TestAngleOfBeyondDeadCentres(t *testing.T) {
	for _, v := range []struct {
		end    int
		volume float64
		comp   bool
		want   float64
	}{
		{HE, 0, true, 0}, {HE, 0, false, 0}, {HE, 1, true, 180}, {HE, 1, false, 180},
		{CE, 0, true, 180}, {CE, 0, false, 180}, {CE, 1, true, 0}, {CE, 1, false, 0},
	} {
		if got := m1.AngleOf(v.end, v.volume, v.comp); got != v.want {
			t.Errorf("end %d volume %g compressing %v: %g°, want %g°", v.end, v.volume, v.comp, got, v.want)
		}
	}
	if !math.IsNaN(m1.AngleOf(HE, math.NaN(), true)) {
		t.Error("NaN volume must give NaN")
	}
}

func TestVolumesTable(t *testing.T) {
	buf := make([]float64, 0, 1000)
	v := m1.Volumes(buf, CE, -60, .5, 961)
	if len(v) != 961 || &v[0] != &buf[:1][0] {
		t.Fatal("the table must reuse the caller's slice")
	}
	for i, got := range v {
		if want := m1.Volume(CE, -60+.5*float64(i)); got != want {
			t.Fatalf("point %d: %g, want %g", i, got, want)
		}
	}
	if d := m1.DVolumes(nil, CE, 0, 1, 3); d[2] != m1.DVolume(CE, 2) {
		t.Errorf("dV table: %g", d[2])
	}
}

func TestValidate(t *testing.T) {
	if err := m1.Validate(); err != nil {
		t.Fatalf("a sound machine is refused: %v", err)
	}
	for _, v := range []struct {
		name  string
		spoil func(*Cylinder)
		want  string
	}{
		{"no bore", func(c *Cylinder) { c.Bore = 0 }, "bore is missing"},
		{"short rod", func(c *Cylinder) { c.ConRod = .05 }, "not longer than the crank radius"},
		{"fat rod", func(c *Cylinder) { c.PistonRod = .3 }, "piston rod (0.3 m) is not thinner"},
		{"fat tail rod", func(c *Cylinder) { c.TailRod = .254 }, "tail rod (0.254 m) is not thinner"},
		{"negative clearance", func(c *Cylinder) { c.Clearance[CE] = -.1 }, "crank-end clearance is negative"},
		{"NaN stroke", func(c *Cylinder) { c.Stroke = math.NaN() }, "stroke is not a number"},
	} {
		c := m1
		v.spoil(&c)
		if err := c.Validate(); err == nil || !strings.Contains(err.Error(), v.want) {
			t.Errorf("%s: error %v, want %q in it", v.name, err, v.want)
		}
	}
	c := m1
	c.Bore, c.MassPiston = -1, -2
	if err := c.Validate(); err == nil || strings.Count(err.Error(), "\n") != 1 {
		t.Errorf("both faults must be told: %v", err)
	}
}
