package ripple

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
)

// Memory is the computed ripple that a restart should not be without for its first turns at each load step.
type Memory []StepMemory

// StepMemory is one load step's part.
type StepMemory struct {
	Step   int                `json:"step"`
	CosSin [Orders][2]float64 `json:"cos_sin"` // of each harmonic of the speed, share of the mean
}

// Snapshot copies it out, by load step.
func (b *Book) Snapshot() (out Memory) {
	for step, c := range b.steps {
		if len(c.list) == 0 {
			continue
		}
		m := StepMemory{Step: step}
		for n, z := range c.inUse {
			m.CosSin[n] = [2]float64{real(z), imag(z)}
		}
		out = append(out, m)
	}
	slices.SortFunc(out, func(a, b StepMemory) int { return a.Step - b.Step })
	return out
}

// Restore takes it back where the ripple is computed. New turns outvote it by their median as they would earlier ones of
// their own.
func (b *Book) Restore(m Memory) error {
	if b.cfg.Torque == nil {
		return nil
	}
	var odd []int
	for _, s := range m {
		var h Harmonics
		for n, v := range s.CosSin {
			h[n] = complex(v[0], v[1])
		}
		if cmplx.IsNaN(h[0]+h[1]) || math.IsNaN(h.Apart(Harmonics{})) || !h.possible() {
			odd = append(odd, s.Step)
			continue
		}
		c := new(computed)
		for i := range c.last {
			c.last[i] = h
		}
		c.n, c.inUse = memory, h
		c.list = h.Ripple(nil)
		b.steps[s.Step] = c
	}
	if odd != nil {
		return fmt.Errorf("ripple: what was remembered of load steps %v cannot be", odd)
	}
	return nil
}

// Lasting is for how many turns in a row nothing must have been computed before that is said.
const Lasting = 10

// Say words what is in force of a computed ripple, and why nothing is; empty where no ripple is computed at the newest
// turn's load step.
func (b *Book) Say() string {
	c := b.now
	if c == nil {
		return ""
	}
	out := "no ripple of the shaft's speed has been computed yet at this load step"
	if len(c.list) > 0 {
		out = "ripple of the shaft's speed computed from the torque of all throws:"
		for n, z := range c.inUse {
			if a := cmplx.Abs(z); a > leastAmp {
				out += fmt.Sprintf(" %.2f %% of order %d,", 100*a, n+1)
			}
		}
		out += fmt.Sprintf(" angles ±%.1f°", computedU)
	}
	if b.mute >= Lasting {
		out += fmt.Sprintf("; not computed for the last %d turns: %s; angles are stated as if it were unknown", b.mute, b.why)
	}
	return out
}
