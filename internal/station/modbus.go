package station

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"time"

	"lapwing/internal/plant"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// viaModbus is the way of an order that came as a coil.
const viaModbus = "modbus"

// openPlant prepares the reading of process values over Modbus. The line asks once a second of samples and gets what was
// read last: it waits for no device. A recording has the values of its own day, so nothing is read beside it.
func (s *Station) openPlant() (err error) {
	if len(s.sk.Modbus.Devices) == 0 {
		return nil
	}
	if strings.HasPrefix(s.o.Source, "wav:") || s.o.ProcessCSV != "" {
		s.log.Warn("the Modbus devices of the skid file are not read: the process values are those of the recording or file", "devices", len(s.sk.Modbus.Devices))
		return nil
	}
	if s.plant, err = plant.NewPoller(s.sk, s.log); err != nil {
		return err
	}
	base := s.proc
	s.proc = func(t float64) skid.Process { return s.plant.At(base(t), time.Now()) }
	return nil
}

// openRegisters opens the register map to others.
func (s *Station) openRegisters() (err error) {
	if s.sk.Modbus.Server.Listen == "" {
		return nil
	}
	if s.registers, err = plant.OpenServer(s.sk, plant.NewMap(s.sk), s.acknowledge, s.log); err != nil {
		return err
	}
	s.log.Info("Modbus server", "address", s.registers.Addr(), "unit", s.sk.Modbus.Server.Unit)
	return nil
}

// acknowledge passes what came as a coil on as orders.
func (s *Station) acknowledge(ctx context.Context, keys []string, by string) error {
	var errs []error
	for _, k := range keys {
		r, err := s.Order(ctx, Order{Verb: wire.VerbAcknowledge, Key: k, By: by, Via: viaModbus})
		if err == nil && !r.Act.Accepted {
			err = fmt.Errorf("station: %s: %s", k, r.Act.Said)
		}
		errs = append(errs, err)
	}
	return errors.Join(errs...)
}

// onTape is a row as the tape keeps it. That nothing is known any more is kept, too: without it the values before would
// seem to hold on when the recording is looked at again.
func onTape(p skid.Process) skid.Process {
	p.Known = p.Known || len(p.Stages) > 0
	return p
}
