package main

import (
	"github.com/spf13/cobra"

	"lapwing/internal/station"
)

func rippleCommand() *cobra.Command {
	var o station.RippleOptions
	cmd := &cobra.Command{
		Use:   "ripple --skid FILE REC.wav",
		Short: "Measure with a toothed recording how unevenly the shaft runs",
		Long: `ripple turns a recording of a toothed wheel or strobe tape into the skid file's ripple numbers, one
set per load step, as lines to paste, with their scatter and every reason not to trust them.

The wheel is either the skid file's own phase reference, or a temporary one on a further input of the
same recording (--wheel, --input); the phase reference beside it then says where angles count from.
Record at least 100 turns in each load step at steady speed; load steps come from the process file.

A wheel is fitted at a shaft that must not turn: stop, isolate, depressurise and lock out, driver
included; keep clear and guard the shaft when it turns; follow site permits, local codes and licensed
practice. Hazardous-area rules decide what may be plugged in on the skid.`,
		Example: `  lapwing ripple --skid skid.yaml rec.wav --wheel 60-2 --input 7 --process process.csv`,
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.Recording, o.Out = args[0], cmd.OutOrStdout()
			return station.Ripple(cmd.Context(), o)
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.SkidFile, "skid", "", "skid file of the recording (required)")
	f.StringVar(&o.ProcessCSV, "process", "", "process values over time (CSV), for the load steps; without it the skid file's")
	f.StringVar(&o.Wheel, "wheel", "", "temporary wheel: teeth-missing (60-2) or teeth and an extra one (12+1)")
	f.IntVar(&o.Input, "input", 0, "converter input of the temporary wheel's sensor, counted from 0")
	_ = cmd.MarkFlagRequired("skid")
	cmd.MarkFlagsRequiredTogether("wheel", "input")
	return cmd
}
