package turn

import "slices"

// Clone gives a copy that shares nothing with the converter's buffers.
func (t *Turn) Clone() *Turn {
	c := *t
	c.Throws = slices.Clone(t.Throws)
	for i := range c.Throws {
		w := &c.Throws[i]
		w.Pos, w.Omega = slices.Clone(w.Pos), slices.Clone(w.Omega)
		w.P[0], w.P[1] = slices.Clone(w.P[0]), slices.Clone(w.P[1])
		w.Vib = slices.Clone(w.Vib)
		for j := range w.Vib {
			v := &w.Vib[j]
			v.X, v.Leak = slices.Clone(v.X), slices.Clone(v.Leak)
			v.Peak, v.RMS = slices.Clone(v.Peak), slices.Clone(v.RMS)
		}
	}
	return &c
}
