// Command lapwingd is the daemon that runs beside the compressor.
package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"os/signal"
	"syscall"
	"time"

	"github.com/coreos/go-systemd/v22/daemon"
	"github.com/spf13/cobra"

	"lapwing/internal/station"
	"lapwing/internal/wire"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	cmd := command()
	if err := cmd.ExecuteContext(ctx); err != nil {
		fmt.Fprintln(os.Stderr, "lapwingd:", err)
		os.Exit(1)
	}
}

func command() *cobra.Command {
	var o station.Options
	var verbose bool
	var records string
	cmd := &cobra.Command{
		Use:   "lapwingd --skid FILE --source SOURCE",
		Short: "Watch the valves of a reciprocating compressor and tell the control room",
		Long: `lapwingd reads samples, follows every valve's angular window, judges the valves, keeps
the raw samples in a rolling tape and sends alarms over MQTT. It runs until SIGTERM.

It is a monitor, not a protection system: it never trips, unloads or controls the machine.
Before touching a valve or transducer: isolate, depressurise and lock out; follow site
permits, local codes and licensed practice.

A new installation has no baseline and judges nothing by it. Prove the channels first
(lapwing check), then declare the machine healthy once with --learn: the next turns of
steady running become the baseline. It is kept in the state folder and used from then on.

Sources:
  wav:FILE       play a recording, paced in real time (add --fast for as fast as it goes)
  exec:FORMAT:PROGRAM ARGUMENT…
                 any program that writes interleaved samples to its standard output, for example
                 exec:format=s24_3le,channels=8:arecord -q -D hw:1 -t raw -f S24_3LE -c 8 -r 51200
                 Formats are those of ALSA (s16_le, s24_le, s24_3le, s32_le, or _be); rate=N where it
                 is not the skid file's, bits=N where fewer are significant, once where the program's
                 end is the end. No shell comes between: where an argument holds a blank, run a script.
                 A program that dies or gives nothing for 5 s is started anew.
  model:NAME     a modelled machine that plays a scripted scenario: ` + station.Scenarios(),
		Args:          cobra.NoArgs,
		SilenceUsage:  true,
		SilenceErrors: true,
		RunE: func(cmd *cobra.Command, _ []string) error {
			level := slog.LevelInfo
			if verbose {
				level = slog.LevelDebug
			}
			o.Log = slog.New(slog.NewTextHandler(os.Stderr, &slog.HandlerOptions{Level: level}))
			if records == "" {
				return run(cmd.Context(), o)
			}
			done, err := writeRecords(records, &o)
			if err != nil {
				return err
			}
			return errors.Join(run(cmd.Context(), o), done())
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.SkidFile, "skid", "", "skid file (required)")
	f.StringVar(&o.State, "state", "lapwing-state", "folder for the tape, the journal and the baseline")
	f.StringVar(&o.Source, "source", "", "where samples come from, see above (required)")
	f.StringVar(&o.ProcessCSV, "process", "", "process values from a CSV beside a recording")
	f.BoolVar(&o.Fast, "fast", false, "do not pace a recording or model in real time")
	f.IntVar(&o.Learn, "learn", 0, "declare the machine healthy now: this many steady turns become the baseline")
	f.StringVar(&o.Broker, "broker", "", "MQTT broker instead of the skid file's and without its credentials, e.g. tcp://127.0.0.1:1883")
	f.StringVar(&o.Listen, "listen", "", "address of the local page instead of the skid file's")
	f.Uint64Var(&o.Seed, "seed", 1, "seed of a modelled machine")
	f.BoolVar(&o.Reserve, "reserve", false, "take the tape's whole size on the disk at the start, so that nobody else can fill it")
	f.StringVar(&records, "records", "", "write every turn record to this new file too, one JSON object a line: for days of commissioning, as it grows without bound")
	f.BoolVar(&verbose, "verbose", false, "log more")
	_ = cmd.MarkFlagRequired("skid")
	_ = cmd.MarkFlagRequired("source")
	return cmd
}

// writeRecords has every turn written to a new file; done says whether all of it could be.
func writeRecords(path string, o *station.Options) (done func() error, err error) {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o640)
	if err != nil {
		return nil, fmt.Errorf("records: %w", err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	enc := json.NewEncoder(w)
	var failed error
	o.OnTurn = func(t *wire.Turn) {
		if failed == nil {
			failed = enc.Encode(t)
		}
	}
	return func() error {
		if err := errors.Join(failed, w.Flush(), f.Close()); err != nil {
			return fmt.Errorf("records: %w", err)
		}
		return nil
	}, nil
}

// run opens the station, tells systemd, and feeds the watchdog from the line's own progress.
func run(ctx context.Context, o station.Options) error {
	s, err := station.Open(o)
	if err != nil {
		return err
	}
	notify := func(state string) { _, _ = daemon.SdNotify(false, state) } // without systemd there is nobody to tell
	status := func() string { h := s.Now().Health; return h.State + ": " + h.Line }
	notify(daemon.SdNotifyReady + "\nSTATUS=" + status())
	every, err := daemon.SdWatchdogEnabled(false)
	if err != nil {
		o.Log.Warn("watchdog setting not understood", "err", err)
	}
	if every > 0 {
		done := make(chan struct{})
		defer close(done)
		go watchdog(done, every/3, s.Progress, status, notify)
	}
	told := context.AfterFunc(ctx, func() { notify(daemon.SdNotifyStopping) })
	err = s.Run(ctx)
	if told() { // the source has ended by itself
		notify(daemon.SdNotifyStopping)
	}
	if cerr := s.Close(); err == nil {
		err = cerr
	}
	return err
}

// watchdog reports to systemd only while samples still pass through the line: a dead line must be restarted.
func watchdog(done <-chan struct{}, every time.Duration, progress func() int64, status func() string, notify func(string)) {
	t := time.NewTicker(every)
	defer t.Stop()
	last := int64(-1)
	for {
		select {
		case <-done:
			return
		case <-t.C:
			if p := progress(); p != last {
				last = p
				notify(daemon.SdNotifyWatchdog + "\nSTATUS=" + status())
			}
		}
	}
}
