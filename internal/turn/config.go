package turn

import (
	"fmt"
	"math"
	"slices"

	"lapwing/internal/dsp"
)

// Defaults of Config, and what a band may reach of the sampling rate.
const (
	DefaultStep = 0.5 // degrees
	bandTop     = 0.45
	bandOrder   = 2   // per edge
	bandRatio   = 1.2 // a band narrower than this ratio of its edges is not worth having
)

// The bands used where Config leaves them zero, in Hz.
func defaultBands() (impact, leak [2]float64) {
	return [2]float64{2000, 20000}, [2]float64{10000, 20000}
}

// Config describes the machine as far as this stage needs it.
type Config struct {
	Rate       float64       // samples per second and channel
	Step       float64       // degrees per grid point, 0.1..1, 60° a whole number of steps; 0: DefaultStep
	Marks      Marks         // the shaft reference
	Throws     []ThrowConfig // at least one, in the order of the skid file
	ImpactBand [2]float64    // Hz; zero: 2..20 kHz. The upper edge is held under 0.45 of the rate
	LeakBand   [2]float64    // Hz; zero: 10..20 kHz, held likewise; Vib.Leak is nil when nothing useful is left of it

	// Do, where given, calls f with 0 to n-1, each once, and returns when all have come back; several may run at the
	// same time. Channels and throws are worked on by it, with the same bits whatever the order. Nil: a plain loop.
	Do func(n int, f func(i int))
}

// Marks is what is known of the shaft reference.
type Marks struct {
	Inner  []float64 // degrees after the opening mark of the further marks within a turn; nil: evenly spaced
	Ripple []Ripple  // the shaft's speed ripple, when known
	U      float64   // degrees, 95 % half-width of angles; 0: by number of marks and ripple, see Uncertainty

	// Shaft, where given, says instead of Ripple and U how the shaft runs in the revolution whose mark comes t seconds
	// after the sample clock's zero. It is asked once for every revolution that is converted, after all earlier turns
	// have been emitted, so it may lean on them and on values that are in force at t, and on nothing else: the same
	// samples must get the same answers however the stream was cut. The answer is copied.
	Shaft func(t float64) Shaft
}

// Shaft is how a shaft runs within a turn.
type Shaft struct {
	Ripple []Ripple // none: not known
	U      float64  // degrees, 95 % half-width; 0: by number of marks and ripple, see Uncertainty
}

// Ripple is one harmonic of the speed within a turn: w = mean·(1 + Σ Amp·cos(Order·θ − PhaseDeg)), θ in degrees
// after the phase mark.
type Ripple struct {
	Order    int
	Amp      float64 // fraction of the mean speed, 0..0.2
	PhaseDeg float64
}

// Channel is one input and its way to engineering units: value = Gain·counts + Offset, in Pa absolute or m/s².
type Channel struct {
	ID           string
	Input        int // index into frame.Frame.Counts; -1 where there is no channel
	Gain, Offset float64
	Min, Max     float64 // values outside make the channel suspect; both zero: not checked
	Passage      Passage // of a pressure channel: undone where known
}

// None gives the channel of an end that has no pressure transducer.
func None() Channel { return Channel{Input: -1} }

// ThrowConfig is one cylinder on its throw.
type ThrowConfig struct {
	DeadCentreDeg float64    // degrees of rotation from the phase mark to this throw's head-end dead centre, 0 <= . < 360
	Pressure      [2]Channel // head end, crank end
	Accel         []Channel  // one list per throw; a sensor that serves two throws stands in both
}

// Uncertainty gives the angle uncertainty in degrees for a number of evenly spaced marks per turn, and whether the
// first two harmonics of the speed ripple are given. It is the half-width that holds 95 % of the angles of a turn, not
// a standard deviation: the numbers are the 95th percentiles of windows.md section 1, 1.2 with one mark and unknown
// ripple of 0.5 to 2 %, 0.3 when it is known, 0.06 with six marks. The dead centre's own error is not in it.
func Uncertainty(marks int, ripple bool) float64 {
	u := 1.2
	switch {
	case marks >= 8:
		u = 0.03
	case marks >= 6:
		u = 0.06
	case marks >= 4:
		u = 0.56
	case marks == 3:
		u = 0.96
	case marks == 2:
		u = 1.1
	}
	if ripple {
		u = math.Min(u, 0.3)
	}
	return u
}

// fill checks a configuration and puts the defaults in.
func (c Config) fill() (Config, error) {
	if !(c.Rate > 0) || math.IsInf(c.Rate, 0) {
		return c, fmt.Errorf("rate %g Hz is not positive", c.Rate)
	}
	if c.Step == 0 {
		c.Step = DefaultStep
	}
	if c.Do == nil {
		c.Do = oneByOne
	}
	if n := PadDeg / c.Step; !(c.Step >= 0.1 && c.Step <= 1) || math.Abs(n-math.Round(n)) > 1e-6 {
		return c, fmt.Errorf("grid step %g° is not within 0.1..1 with %d° a whole number of steps", c.Step, PadDeg)
	}
	impact, leak := defaultBands()
	if c.ImpactBand == [2]float64{} {
		c.ImpactBand = impact
	}
	if c.LeakBand == [2]float64{} {
		c.LeakBand = leak
	}
	for _, b := range []*[2]float64{&c.ImpactBand, &c.LeakBand} {
		if !(b[0] > 0) || !(b[1] > b[0]) || math.IsInf(b[1], 0) {
			return c, fmt.Errorf("band %g..%g Hz is not a band", b[0], b[1])
		}
		b[1] = math.Min(b[1], bandTop*c.Rate)
	}
	if err := c.Marks.check(); err != nil {
		return c, err
	}
	if len(c.Throws) == 0 {
		return c, fmt.Errorf("no throw")
	}
	channels := 0
	for i, t := range c.Throws {
		if !(t.DeadCentreDeg >= 0) || !(t.DeadCentreDeg < 360) {
			return c, fmt.Errorf("throw %d: dead centre at %g° is not within 0..360", i+1, t.DeadCentreDeg)
		}
		for _, ch := range slices.Concat(t.Pressure[:], t.Accel) {
			if ch.Input >= 0 {
				channels++
			}
			if ch.Input >= 0 && !(ch.Gain != 0 && finite(ch.Gain) && finite(ch.Offset)) {
				return c, fmt.Errorf("throw %d: channel %q: gain %g, offset %g", i+1, ch.ID, ch.Gain, ch.Offset)
			}
			if p := ch.Passage; p != (Passage{}) && !(p.Hz > 0 && p.Hz < c.Rate/4 && p.Q > 0 && finite(p.Q)) {
				return c, fmt.Errorf("throw %d: channel %q: passage of %g Hz, Q %g; want 0 < Hz < a quarter of the rate, Q > 0", i+1, ch.ID, p.Hz, p.Q)
			}
			if ch.Min != 0 && !(ch.Max > ch.Min) || ch.Max != 0 && !(ch.Max > ch.Min) {
				return c, fmt.Errorf("throw %d: channel %q: valid range %g..%g", i+1, ch.ID, ch.Min, ch.Max)
			}
		}
		for _, ch := range t.Accel {
			if ch.Input < 0 {
				return c, fmt.Errorf("throw %d: accelerometer %q has no input", i+1, ch.ID)
			}
		}
	}
	if channels == 0 {
		return c, fmt.Errorf("no throw has a pressure or an accelerometer")
	}
	return c, nil
}

func (m Marks) check() error {
	last := 0.0
	for _, a := range m.Inner {
		if !(a > last) || !(a < 360) {
			return fmt.Errorf("inner marks %v are not increasing within 0..360", m.Inner)
		}
		last = a
	}
	if !(m.U >= 0) || math.IsInf(m.U, 0) {
		return fmt.Errorf("angle uncertainty %g°", m.U)
	}
	return checkRipple(m.Ripple)
}

func checkRipple(list []Ripple) error {
	slow := 0.0
	for _, r := range list {
		if r.Order < 1 || r.Order > 12 || !(r.Amp >= 0) || !finite(r.PhaseDeg) {
			return fmt.Errorf("ripple of order %d, amplitude %g, phase %g°", r.Order, r.Amp, r.PhaseDeg)
		}
		slow += r.Amp
	}
	if !(slow <= 0.2) {
		return fmt.Errorf("ripple of %g of the mean speed: amplitudes are fractions, 0.2 in all at most", slow)
	}
	return nil
}

// knowsRipple: both of the first two harmonics given; twice-a-turn alone still leaves 0.35° at the 95th percentile.
func knowsRipple(list []Ripple) bool {
	var one, two bool
	for _, r := range list {
		one, two = one || r.Order == 1, two || r.Order == 2
	}
	return one && two
}

// band designs the filter of a band; nil when the sampling rate leaves nothing useful of it.
func (c Config) band(b [2]float64) (dsp.SOS, error) {
	if b[1] < bandRatio*b[0] {
		return nil, nil
	}
	return dsp.BandPass(bandOrder, b[0], b[1], c.Rate)
}

func oneByOne(n int, f func(i int)) {
	for i := range n {
		f(i)
	}
}

func finite(x float64) bool { return !math.IsNaN(x - x) }
