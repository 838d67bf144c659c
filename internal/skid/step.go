package skid

import "lapwing/internal/crank"

// EndName names one end of a throw: t1.he. throw indexes Throws, end is crank.HE or crank.CE.
func (sk *Skid) EndName(throw, end int) string { return sk.Throws[throw].ID + "." + endIDs[end] }

// findEnd is the way back from a name.
func (sk *Skid) findEnd(name string) (throw, end int, ok bool) {
	for t := range sk.Throws {
		for e := range endIDs {
			if sk.EndName(t, e) == name {
				return t, e, true
			}
		}
	}
	return 0, 0, false
}

// FindStep gives the load step of a code; ok is false when the file names none such.
func (sk *Skid) FindStep(code int) (Step, bool) {
	for _, s := range sk.Steps {
		if s.Code == code {
			return s, true
		}
	}
	return Step{}, false
}

// CylinderAt is a throw's cylinder with the pockets of a load step (by code) open. A code that the file does not
// name opens none.
func (sk *Skid) CylinderAt(throw, code int) crank.Cylinder {
	c := sk.Throws[throw].Cylinder
	s, ok := sk.FindStep(code)
	if !ok {
		return c
	}
	for e := range c.Clearance {
		c.Clearance[e] += s.Pocket[sk.EndName(throw, e)]
	}
	return c
}

// RippleAt is the speed ripple of a load step: its own, or the machine's where it gives none or the code is unknown.
func (sk *Skid) RippleAt(code int) []Ripple {
	if s, ok := sk.FindStep(code); ok && s.Ripple != nil {
		return s.Ripple
	}
	return sk.Phase.Ripple
}

// ComputesRipple reports whether the ripple is computed from the torque of all throws: nobody has measured it, the
// inertia is known, and so is the pressure in every working end.
func (sk *Skid) ComputesRipple() bool {
	if sk.Machine.Inertia == 0 || sk.Phase.Ripple != nil {
		return false
	}
	for _, s := range sk.Steps {
		if s.Ripple != nil {
			return false
		}
	}
	return sk.unmeasured() == ""
}

// unmeasured names the first working end without a pressure channel, "" when there is none.
func (sk *Skid) unmeasured() string {
	for i := range sk.Throws {
		for e, end := range sk.Throws[i].Ends {
			if end.Works && end.Pressure == "" {
				return sk.EndName(i, e)
			}
		}
	}
	return ""
}

// PressureBand is the frequency, Hz, up to which (-3 dB) pressures on the angle grid are seen at a speed: package turn
// smooths them over half a grid step, or over 0.8 samples. Without a stated rate only the grid bounds it.
func (sk *Skid) PressureBand(rpm float64) float64 {
	b := 0.265 / sk.Detection.GridDeg * 6 * rpm
	if sk.Rate > 0 {
		b = min(b, 0.166*sk.Rate)
	}
	return b
}

// Stages is the number of stages, the highest stage number of any throw.
func (sk *Skid) Stages() int {
	n := 0
	for _, t := range sk.Throws {
		n = max(n, t.Stage)
	}
	return n
}

// ChannelByID gives a channel; ok is false when there is none of that name.
func (sk *Skid) ChannelByID(id string) (Channel, bool) {
	for _, c := range sk.Channels {
		if c.ID == id {
			return c, true
		}
	}
	return Channel{}, false
}
