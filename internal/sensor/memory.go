package sensor

import "fmt"

// Memory is what a restart should not have to learn again.
type Memory struct {
	Channels []ChannelMemory `json:"channels"`
}

// ChannelMemory is one channel's part.
type ChannelMemory struct {
	ID       string     `json:"id"`
	Usual    Levels     `json:"usual"`
	Standing []Standing `json:"standing,omitempty"`
}

// Standing is a fault that stood. Turns and samples are counted anew by another run and are not kept.
type Standing struct {
	Fault  string `json:"fault"`
	Reason string `json:"reason"`
}

// Snapshot copies it out.
func (w *Watch) Snapshot() Memory {
	var m Memory
	for i := range w.ch {
		c := &w.ch[i]
		cm := ChannelMemory{ID: c.ID, Usual: c.levels}
		for k := range faults {
			if c.ep[k].standing {
				cm.Standing = append(cm.Standing, Standing{k.String(), c.ep[k].reason})
			}
		}
		m.Channels = append(m.Channels, cm)
	}
	return m
}

// Restore takes it back. Channels that this machine does not have, faults that are not known and levels that cannot be
// are left out and named in the error. A fault that stood goes on standing until its hold has passed without it; one that
// was told, until it is told again.
func (w *Watch) Restore(m Memory) error {
	var out []string
	for _, cm := range m.Channels {
		c := w.find(cm.ID)
		if c == nil || !cm.Usual.sound() {
			out = append(out, cm.ID)
			continue
		}
		c.levels = cm.Usual
		for _, s := range cm.Standing {
			if k, ok := faultNamed(s.Fault); ok && s.Reason != "" {
				c.ep[k] = episode{standing: true, reason: s.Reason, last: unknownTurn, told: k.isTold()}
			} else {
				out = append(out, cm.ID+": "+s.Fault)
			}
		}
	}
	if len(out) > 0 {
		return fmt.Errorf("sensor: what was remembered does not fit this machine: %q", out)
	}
	return nil
}

func (w *Watch) find(id string) *watched {
	for i := range w.ch {
		if w.ch[i].ID == id {
			return &w.ch[i]
		}
	}
	return nil
}

func faultNamed(name string) (Fault, bool) {
	for k := range faults {
		if k.String() == name {
			return k, true
		}
	}
	return 0, false
}
