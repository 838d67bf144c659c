package turn

import (
	"math"
	"strings"
	"testing"
)

func TestConfigRefusals(t *testing.T) {
	for name, spoil := range map[string]func(*Config){
		"no rate":       func(c *Config) { c.Rate = 0 },
		"step":          func(c *Config) { c.Step = 0.7 },
		"fine step":     func(c *Config) { c.Step = 0.05 },
		"no throws":     func(c *Config) { c.Throws = nil },
		"dead centre":   func(c *Config) { c.Throws[0].DeadCentreDeg = 360 },
		"NaN gain":      func(c *Config) { c.Throws[0].Pressure[0].Gain = math.NaN() },
		"zero gain":     func(c *Config) { c.Throws[0].Accel[0].Gain = 0 },
		"range":         func(c *Config) { c.Throws[0].Accel[0].Min = 2000 },
		"no input":      func(c *Config) { c.Throws[0].Accel[0].Input = -1 },
		"passage":       func(c *Config) { c.Throws[0].Pressure[0].Passage = Passage{Hz: 900} },
		"band":          func(c *Config) { c.ImpactBand = [2]float64{5000, 3000} },
		"ripple size":   func(c *Config) { c.Marks.Ripple = []Ripple{{2, 2, 0}} },
		"ripple order":  func(c *Config) { c.Marks.Ripple = []Ripple{{0, 0.01, 0}} },
		"marks":         func(c *Config) { c.Marks.Inner = []float64{200, 100} },
		"uncertainty":   func(c *Config) { c.Marks.U = -1 },
		"nothing to do": func(c *Config) { c.Throws = []ThrowConfig{{Pressure: [2]Channel{None(), None()}}} },
	} {
		cfg, _ := machine(t, 1)
		spoil(&cfg)
		if _, err := New(cfg); err == nil || !strings.HasPrefix(err.Error(), "turn: ") {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestMarksThatDoNotFit(t *testing.T) {
	cfg, frames := machine(t, 7)
	frames[3].Inner = []float64{(frames[3].Mark0 + frames[3].Mark1) / 2}
	for i, turn := range run(converter(t, cfg), frames) {
		if i >= 1 && i <= 4 && !strings.Contains(turn.Reason, "number of marks") {
			t.Errorf("turn %d: %q", i, turn.Reason)
		}
	}
	cfg, frames = machine(t, 7)
	cfg.Marks.Inner = []float64{120, 240}
	if r := run(converter(t, cfg), frames)[2].Reason; !strings.Contains(r, "configured") {
		t.Errorf("%q", r)
	}
}
