// Package demo plays the main job on a modelled machine: a daemon, a broker inside the process, and a control room
// that reads what arrives. Site, machine and event are invented.
package demo

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"slices"
	"sync"
	"time"

	"lapwing/configs"
	"lapwing/internal/scenario"
	"lapwing/internal/station"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"

	"lapwing/internal/skid"
)

// Options of the demo.
type Options struct {
	Dir      string // scratch folder for tape, journal and the pulled clip; emptied first
	SkidFile string // empty: the built-in biomethane machine
	Scenario string // empty: grow
	Fast     bool   // as fast as the machine allows instead of real time
	Once     bool   // end when the scenario ends; otherwise play on until stopped
	Seed     uint64
	Learn    int // turns of the learning run; 0: what the scenario allows
	Listen   string
	Out      io.Writer
	Log      *slog.Logger
}

const builtin = "biomethane-two-throw.yaml"

// Run plays the demo.
func Run(ctx context.Context, o Options) error {
	o.fill()
	if err := freshDir(o.Dir); err != nil {
		return err
	}
	file, err := o.skidFile()
	if err != nil {
		return err
	}
	sk, err := skid.Load(file)
	if err != nil {
		return err
	}
	run, err := scenario.Get(o.Scenario, sk)
	if err != nil {
		return err
	}
	if o.Learn == 0 {
		o.Learn = run.Learn
	}
	b, err := openBroker()
	if err != nil {
		return err
	}
	defer b.close()

	say := &teller{w: o.Out, sk: sk, run: run}
	say.opening(file, b.addr)
	room, err := openRoom(ctx, b.addr, sk.Uplink.Root, say)
	if err != nil {
		return err
	}
	var st *station.Station
	var pulled error
	atEnd := func(ctx context.Context) {
		if o.Once {
			pulled = pull(ctx, st, o.Dir, say)
			return
		}
		say.printf("\nThe scenario is over; the page stays up until you press Ctrl-C.\n")
		<-ctx.Done()
	}
	st, err = station.Open(station.Options{
		SkidFile: file, State: filepath.Join(o.Dir, "state"), Source: "model:" + o.Scenario, Fast: o.Fast, Learn: o.Learn,
		Broker: b.addr, Listen: o.Listen, Seed: o.Seed, Log: o.Log, OnTurn: say.turn, AtEnd: atEnd,
	})
	if err != nil {
		return errors.Join(err, room.close())
	}
	say.page(st.PageURL())
	err = errors.Join(st.Run(ctx), pulled)
	err = errors.Join(err, st.Close())
	return errors.Join(err, room.close(), say.ending())
}

func (o *Options) fill() {
	if o.Scenario == "" {
		o.Scenario = "grow"
	}
	if o.Dir == "" {
		o.Dir = filepath.Join("out", "demo")
	}
	if o.Out == nil {
		o.Out = os.Stdout
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	if o.Listen == "" {
		o.Listen = "127.0.0.1:0"
	}
}

// freshDir empties a scratch folder, but only one that a demo made.
func freshDir(dir string) error {
	const sign = ".lapwing-demo"
	entries, err := os.ReadDir(dir)
	if err == nil && len(entries) > 0 {
		if _, err := os.Stat(filepath.Join(dir, sign)); err != nil {
			return fmt.Errorf("demo: folder %s is not empty and no demo made it: name another with --out", dir)
		}
		if err := os.RemoveAll(dir); err != nil {
			return fmt.Errorf("demo: %w", err)
		}
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("demo: %w", err)
	}
	return os.WriteFile(filepath.Join(dir, sign), []byte("scratch folder of lapwing demo; emptied at its next start\n"), 0o644)
}

// skidFile writes the built-in machine beside the demo's results, so that it can be read and changed.
func (o *Options) skidFile() (string, error) {
	if o.SkidFile != "" {
		return o.SkidFile, nil
	}
	raw, err := configs.Files.ReadFile(builtin)
	if err != nil {
		return "", fmt.Errorf("demo: %w", err)
	}
	file := filepath.Join(o.Dir, builtin)
	return file, os.WriteFile(file, raw, 0o644)
}

// room is the control room: an MQTT client of its own, which knows nothing but what arrives.
type room struct {
	stop context.CancelFunc
	done chan error
}

func openRoom(ctx context.Context, broker, root string, say *teller) (*room, error) {
	ctx, stop := context.WithCancel(context.WithoutCancel(ctx))
	r := &room{stop: stop, done: make(chan error, 1)}
	ready := make(chan struct{})
	var once sync.Once
	reader := uplink.Reader{W: say, Root: root, Evidence: 6}
	go func() {
		r.done <- uplink.Listen(ctx, uplink.Config{Broker: broker, ClientID: "control-room"}, root, func(m uplink.Received) {
			say.received(m)
			reader.Show(m)
		}, func(string) { once.Do(func() { close(ready) }) })
	}()
	select {
	case <-ready:
		return r, nil
	case err := <-r.done:
		stop()
		return nil, err
	case <-time.After(15 * time.Second):
		stop()
		return nil, errors.New("demo: the broker inside the process does not answer")
	}
}

func (r *room) close() error {
	r.stop()
	return <-r.done
}

// pull fetches the clip of the first alarm, as an analyst would.
func pull(ctx context.Context, st *station.Station, dir string, say *teller) error {
	clips := st.Now().Clips
	i := slices.IndexFunc(clips, func(c wire.Clip) bool { return len(c.Alarms) > 0 }) // others are references
	if i < 0 {
		return nil
	}
	c := clips[i]
	out := filepath.Join(dir, "clip-"+c.ID)
	if err := os.MkdirAll(out, 0o755); err != nil {
		return fmt.Errorf("demo: %w", err)
	}
	if err := st.Export(ctx, c.ID, out); err != nil {
		return err
	}
	say.pulled(c, out)
	return nil
}

// alarms reads an alarm message back.
func alarmOf(root string, m uplink.Received) (wire.Alarm, bool) {
	var a wire.Alarm
	_, part, _ := uplink.Part(root, m.Topic)
	if part != "alarm" || json.Unmarshal(m.Payload, &a) != nil {
		return wire.Alarm{}, false
	}
	return a, true
}
