package plant

import (
	"cmp"
	"slices"

	"lapwing/internal/skid"
)

const (
	mostRegisters = 125  // of one request: Modbus application protocol V1.1b3, 6.3 and 6.4
	mostBits      = 2000 // 6.1 and 6.2
	gapRegisters  = 16   // read along rather than asked for apart: a request costs more than 32 bytes
	gapBits       = 64
)

// block is one request: consecutive addresses of one function.
type block struct {
	function int
	first, n int
	guard    guard
	tags     []int // indices of the device's tags in it; none in a guard's
}

// guard is what a block is read for beside values.
type guard int

const (
	noGuard guard = iota
	canary
	heartbeat
)

// plan groups a device's tags into as few requests as go with the bounds. The guards have blocks of their own and
// come first, so that nothing is believed before they were right.
func plan(d *skid.ModbusDevice) []block {
	order := make([]int, len(d.Tags))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int {
		x, y := &d.Tags[a], &d.Tags[b]
		return cmp.Or(cmp.Compare(x.Function, y.Function), cmp.Compare(x.Address, y.Address))
	})
	var out []block
	if c := d.Canary; c != nil {
		out = append(out, block{function: c.Function, first: c.Address, n: c.Words(), guard: canary})
	}
	if h := d.Heartbeat; h != nil {
		out = append(out, block{function: h.Function, first: h.Address, n: h.Words(), guard: heartbeat})
	}
	for _, i := range order {
		t := &d.Tags[i]
		most, gap := mostRegisters, gapRegisters
		if t.Function <= 2 {
			most, gap = mostBits, gapBits
		}
		if n := len(out); n > 0 && out[n-1].guard == noGuard && out[n-1].function == t.Function {
			b := &out[n-1]
			end := max(b.first+b.n, t.Address+t.Words())
			if t.Address <= b.first+b.n+gap && end-b.first <= most {
				b.n = end - b.first
				b.tags = append(b.tags, i)
				continue
			}
		}
		out = append(out, block{function: t.Function, first: t.Address, n: t.Words(), tags: []int{i}})
	}
	return out
}

// apart gives a block's tags one by one: a device that has a hole between two registers refuses to read across it.
func (b *block) apart(d *skid.ModbusDevice) []block {
	var out []block
	for _, i := range b.tags {
		t := &d.Tags[i]
		out = append(out, block{function: t.Function, first: t.Address, n: t.Words(), tags: []int{i}})
	}
	return out
}
