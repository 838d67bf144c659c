package main

import (
	"github.com/spf13/cobra"

	"lapwing/internal/station"
)

func datumCommand() *cobra.Command {
	var o station.DatumOptions
	cmd := &cobra.Command{
		Use:   "datum --skid FILE REC.wav",
		Short: "Estimate dead centres, clearances, pressure zeros and gauge passages",
		Long: `datum estimates, from a recording of a healthy machine at several duties, where each throw's dead
centre really is, each end's clearance, each transducer's zero and the resonance of its gauge passage,
with intervals, beside what the skid file says. It never changes the file.

Record four pressure ratios at two speeds if the process allows, each held for a minute, with all valves
known to be good. Line pressures, temperatures and load steps come from the process file.

An estimate is a reason to look, not a proof. A dead centre is proven mechanically with the machine
stopped, isolated, depressurised and locked out, driver included, by people authorised to do it; follow
site permits, local codes and licensed practice.`,
		Example: `  lapwing datum --skid skid.yaml rec.wav --process process.csv`,
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.Recording, o.Out = args[0], cmd.OutOrStdout()
			return station.Datum(cmd.Context(), o)
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.SkidFile, "skid", "", "skid file of the recording (required)")
	f.StringVar(&o.ProcessCSV, "process", "", "process values over time (CSV); without it the skid file's")
	_ = cmd.MarkFlagRequired("skid")
	return cmd
}
