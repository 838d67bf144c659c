package main

import (
	"log/slog"
	"os"

	"github.com/spf13/cobra"

	"lapwing/internal/demo"
	"lapwing/internal/scenario"
)

func demoCommand() *cobra.Command {
	var o demo.Options
	var verbose bool
	cmd := &cobra.Command{
		Use:   "demo",
		Short: "Play a modelled machine from healthy to alarm, with everything real but the machine",
		Long: `demo starts a modelled two-throw compressor, an MQTT broker inside the process, the daemon with
its status page, and a control room that subscribes. It plays a scripted few minutes: healthy
turns to learn from, load swings, a growing leak, the alarm, and the raw clip behind it.
Everything between the samples and the message is the real line. Site and event are invented.

Scenarios:` + scenario.Help(),
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			o.Out = cmd.OutOrStdout()
			if verbose {
				o.Log = slog.New(slog.NewTextHandler(os.Stderr, nil))
			}
			return demo.Run(cmd.Context(), o)
		},
	}
	f := cmd.Flags()
	f.BoolVar(&o.Once, "once", false, "end by itself when the scenario ends, and pull the clip")
	f.BoolVar(&o.Fast, "fast", false, "play as fast as this machine allows instead of in real time")
	f.StringVar(&o.Dir, "out", "out/demo", "scratch folder; emptied at the start")
	f.StringVar(&o.SkidFile, "skid", "", "another skid file than the built-in one")
	f.StringVar(&o.Scenario, "scenario", "grow", "what to play, see above")
	f.Uint64Var(&o.Seed, "seed", 1, "seed of the modelled machine")
	f.IntVar(&o.Learn, "learn", 0, "steady turns of the learning run; 0: what the scenario allows")
	f.StringVar(&o.Listen, "listen", "127.0.0.1:0", "address of the status page")
	f.BoolVar(&verbose, "verbose", false, "show the daemon's log")
	return cmd
}
