package plant

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"time"

	"github.com/simonvetter/modbus"
)

const (
	longestBackoff = 30 * time.Second // between two attempts at a device that does not answer; sixteen of its intervals where that is less
	refusedAgain   = 5 * time.Minute  // until a register that a device does not have is asked for again: somebody may have changed it
)

// bus is one connection or serial line with its devices. Its goroutine alone touches it.
type bus struct {
	poller  *Poller
	devices []*device
	conf    *modbus.ClientConfiguration
	serial  bool          // answers carry no number: a late one would be taken for the next
	rest    time.Duration // of a serial line after an error: by then every late answer has come in
	timeout time.Duration
	client  *modbus.ModbusClient // nil: closed
	quiet   time.Time            // not to be opened before
	fails   int                  // attempts to open, in a row
}

func (b *bus) run(ctx context.Context) {
	defer b.close()
	for {
		d := b.devices[0]
		for _, e := range b.devices[1:] {
			if e.due.Before(d.due) {
				d = e
			}
		}
		due := d.due
		if b.client == nil && b.quiet.After(due) {
			due = b.quiet
		}
		if !pause(ctx, time.Until(due)) {
			return
		}
		err := b.round(ctx, d)
		if ctx.Err() != nil {
			return
		}
		b.report(d, err)
		wait := d.Every
		if err != nil {
			d.fails++
			wait = backoff(d.Every, d.fails)
		} else {
			d.fails = 0
		}
		d.due = time.Now().Add(jitter(wait))
	}
}

// backoff doubles from the usual interval on.
func backoff(every time.Duration, fails int) time.Duration {
	return max(every, min(longestBackoff, every<<min(fails-1, 4)))
}

// jitter keeps many daemons from asking one gateway in step.
func jitter(d time.Duration) time.Duration {
	return d + time.Duration((rand.Float64()-0.5)*0.1*float64(d))
}

func pause(ctx context.Context, d time.Duration) bool {
	if d <= 0 {
		return ctx.Err() == nil
	}
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-ctx.Done():
		return false
	case <-t.C:
		return true
	}
}

// round reads a device once. An error says that it does not answer as it should; a register it does not have is no error.
func (b *bus) round(ctx context.Context, d *device) error {
	if err := b.open(ctx); err != nil {
		b.note(d, nil, fmt.Sprintf("no connection: %v", err))
		return err
	}
	_ = b.client.SetUnitId(uint8(d.Unit))
	got := map[int]reading{}
	var first error
	for i := 0; i < len(d.blocks); i++ { // a block may be taken apart on the way
		blk := &d.blocks[i]
		if time.Now().Before(d.asked[i]) {
			continue
		}
		words, err := b.read(blk)
		now := time.Now()
		switch {
		case blk.guard != noGuard && (refused(err) || exception(err)):
			err = fmt.Errorf("%s cannot be read, so nothing from this device is believed: %w", [...]string{canary: "the canary", heartbeat: "the heartbeat"}[blk.guard], err)
			if b.serial {
				b.close()
			}
			b.note(d, nil, err.Error())
			return err
		case err == nil && blk.guard != noGuard:
			if err = d.watch(blk.guard, words, now); err != nil {
				b.close()
				b.forget(d, err.Error(), now)
				return err
			}
		case err == nil:
			for _, k := range blk.tags {
				t := &d.Tags[k]
				at := t.Address - blk.first
				v, verr := value(t, b.poller.sk, words[at:at+t.Words()])
				got[k] = reading{v: v, at: now}
				if verr != nil {
					got[k] = reading{why: verr.Error(), since: now}
				}
			}
		case (refused(err) || errors.Is(err, modbus.ErrServerDeviceFailure)) && len(blk.tags) > 1 && !b.serial:
			d.takeApart(i) // a hole within the block, perhaps, or more at once than the device gives
			i--
		case refused(err) || errors.Is(err, modbus.ErrServerDeviceFailure) && len(blk.tags) > 1:
			if len(blk.tags) > 1 {
				d.takeApart(i)
			} else {
				d.asked[i] = now.Add(refusedAgain)
				for _, k := range blk.tags {
					got[k] = reading{why: fmt.Sprintf("the device refuses function %d at address %d (%v): check function and address in the skid file", blk.function, blk.first, err), since: now}
				}
			}
			if b.serial {
				b.close()
				b.note(d, got, "")
				return nil
			}
		case exception(err):
			if first == nil {
				first = err
			}
			if b.serial {
				b.close()
				b.note(d, got, err.Error())
				return err
			}
		default:
			b.close()
			if b.serial {
				got = nil // the line was not in order: what came in this round is not used
			}
			b.note(d, got, err.Error())
			return err
		}
	}
	if first == nil {
		b.note(d, got, "")
		return nil
	}
	b.note(d, got, first.Error())
	for _, r := range got {
		if r.why == "" {
			return nil // the rest of the device answers: no reason to ask it more rarely
		}
	}
	return first
}

// watch says what is wrong by a guard.
func (d *device) watch(g guard, words []uint16, now time.Time) error {
	if g == canary {
		if v, err := decode(d.Canary.Type, d.Canary.Order, words); err != nil || v != d.Canary.Is {
			return fmt.Errorf("the canary reads %g instead of %g: nothing from this device is believed", v, d.Canary.Is)
		}
		return nil
	}
	h := d.Heartbeat
	v, err := decode(h.Type, h.Order, words)
	if err != nil {
		return fmt.Errorf("the heartbeat is no number: nothing from this device is believed")
	}
	if d.beatAt.IsZero() || v != d.beat {
		d.beat, d.beatAt = v, now
	}
	if still := now.Sub(d.beatAt); still > h.Within {
		return fmt.Errorf("the heartbeat stands still at %g: what is behind this device has stopped, and nothing from it is believed", v)
	}
	return nil
}

func (d *device) takeApart(i int) {
	parts := d.blocks[i].apart(d.ModbusDevice)
	d.blocks = append(d.blocks[:i:i], append(parts, d.blocks[i+1:]...)...)
	d.asked = make([]time.Time, len(d.blocks))
}

// open connects if need be, after the rest that a serial line wants.
func (b *bus) open(ctx context.Context) error {
	if b.client != nil {
		return nil
	}
	if !pause(ctx, time.Until(b.quiet)) {
		return ctx.Err()
	}
	c, err := modbus.NewClient(b.conf)
	if err != nil {
		return err
	}
	// The library gives a connection up to 15 s, and nobody must wait for that when the daemon stops.
	opened := make(chan error, 1)
	go func() { opened <- c.Open() }()
	select {
	case err = <-opened:
	case <-ctx.Done():
		go func() {
			if <-opened == nil {
				_ = c.Close()
			}
		}()
		return ctx.Err()
	}
	if err != nil {
		b.fails++
		b.quiet = time.Now().Add(jitter(backoff(b.devices[0].Every, b.fails)))
		return err
	}
	b.client, b.fails = c, 0
	return nil
}

// close ends the connection; a serial line then rests until every late answer must have come in.
func (b *bus) close() {
	if b.client == nil {
		return
	}
	_ = b.client.Close()
	b.client = nil
	if b.serial {
		b.quiet = time.Now().Add(b.rest)
	}
}

// read asks for one block and gives one word per register or bit. Whatever the library makes of a garbled answer, the
// goroutine lives on.
func (b *bus) read(blk *block) (words []uint16, err error) {
	defer func() {
		if x := recover(); x != nil {
			words, err = nil, fmt.Errorf("answer not understood: %v", x)
		}
	}()
	var bits []bool
	first, n := uint16(blk.first), uint16(blk.n)
	switch blk.function {
	case 1:
		bits, err = b.client.ReadCoils(first, n)
	case 2:
		bits, err = b.client.ReadDiscreteInputs(first, n)
	case 3:
		words, err = b.client.ReadRegisters(first, n, modbus.HOLDING_REGISTER)
	default:
		words, err = b.client.ReadRegisters(first, n, modbus.INPUT_REGISTER)
	}
	if err != nil {
		return nil, err
	}
	for _, x := range bits {
		w := uint16(0)
		if x {
			w = 1
		}
		words = append(words, w)
	}
	if len(words) != blk.n {
		return nil, fmt.Errorf("%d values instead of %d", len(words), blk.n)
	}
	return words, nil
}

// refused: the device does not have what the skid file says it has.
func refused(err error) bool {
	return errors.Is(err, modbus.ErrIllegalFunction) || errors.Is(err, modbus.ErrIllegalDataAddress) || errors.Is(err, modbus.ErrIllegalDataValue)
}

// exception: the device is there and says that it cannot answer now.
func exception(err error) bool {
	for _, e := range []error{modbus.ErrServerDeviceFailure, modbus.ErrAcknowledge, modbus.ErrServerDeviceBusy, modbus.ErrMemoryParityError, modbus.ErrGWPathUnavailable, modbus.ErrGWTargetFailedToRespond} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}

// note puts what a round brought in place of what was known; tags it did not reach keep their value, which ages.
func (b *bus) note(d *device, got map[int]reading, link string) {
	old := d.state.Load()
	next := &state{tags: append([]reading(nil), old.tags...), link: link}
	for k, r := range got {
		if r.why != "" && old.tags[k].why != "" {
			r.since = old.tags[k].since
		}
		next.tags[k] = r
	}
	d.state.Store(next)
}

// forget takes every value of a device back.
func (b *bus) forget(d *device, why string, now time.Time) {
	got := map[int]reading{}
	for k := range d.Tags {
		got[k] = reading{why: why, since: now}
	}
	b.note(d, got, why)
}

// report logs what has changed, once.
func (b *bus) report(d *device, err error) {
	said := ""
	if err != nil {
		said = err.Error()
	}
	if said == d.said {
		return
	}
	if said != "" {
		b.poller.log.Warn("process values: device does not answer as it should", "device", d.Name, "url", d.URL, "unit", d.Unit, "err", said)
	} else {
		b.poller.log.Info("process values: device answers", "device", d.Name)
	}
	d.said = said
}
