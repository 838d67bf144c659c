package main

import (
	"github.com/spf13/cobra"

	"lapwing/internal/skid"
)

func checkCommand() *cobra.Command {
	var rate float64
	cmd := &cobra.Command{
		Use:   "check FILE",
		Short: "Say what a skid file was understood to mean, and every doubt",
		Long: `check reads a skid file strictly. What is wrong is refused with file, line, column and what to
write instead. What is right is printed back as the machine it describes: swept and clearance
volumes, expected rod load, opening angles, sampling per degree. Doubts are things that are
possible but odd; each says what it means and how people usually find out.

To measure on the machine what the file must say (clearance, dead centre, a transducer's zero), have
it stopped, isolated, depressurised and locked out first; follow site permits, local codes and
licensed practice. Hazardous-area rules decide what may be plugged in on the skid.`,
		Example: `  lapwing check skid.yaml`,
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			sk, err := skid.Load(args[0])
			if err != nil {
				return err
			}
			out := cmd.OutOrStdout()
			if rate == 0 {
				rate = sk.Rate
			}
			return skid.Report(out, sk, rate)
		},
	}
	cmd.Flags().Float64Var(&rate, "rate", 0, "sampling rate in Hz instead of the file's")
	return cmd
}
