package plant

import (
	"testing"
	"time"

	"lapwing/internal/skid"
)

// BenchmarkAt is what the line waits for once a second of samples.
func BenchmarkAt(b *testing.B) {
	sk := withModbus(b, one("tcp://127.0.0.1:1", "", tagPs, tagPd, tagStep))
	p, err := NewPoller(sk, quietLog())
	if err != nil {
		b.Fatal(err)
	}
	t0 := time.Now()
	p.devices[0].state.Store(&state{tags: []reading{{v: 8e5, at: t0}, {v: 22e5, at: t0}, {v: 1, at: t0}}})
	var q skid.Process
	for b.Loop() {
		q = p.At(sk.Process, t0)
	}
	_ = q
}

// BenchmarkShow is what a turn costs for the registers.
func BenchmarkShow(b *testing.B) {
	sk := withModbus(b, "  server: {listen: '127.0.0.1:0'}\n")
	s := &Server{m: NewMap(sk), conf: sk.Modbus.Server}
	n, points := snapshot()
	b.ReportAllocs()
	for b.Loop() {
		s.Show(n, points, false)
	}
}

// BenchmarkRequest is one request of 125 registers over loopback and its answer.
func BenchmarkRequest(b *testing.B) {
	s := serving(b, nil, quietLog(), nil)
	c := dial(b, s)
	_ = c.SetDeadline(time.Time{})
	for b.Loop() {
		ask(b, c, 1, 4, 0, 0, 0, 125)
	}
}
