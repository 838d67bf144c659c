package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"lapwing/internal/plant"
	"lapwing/internal/skid"
)

func registersCommand() *cobra.Command {
	var asCSV bool
	cmd := &cobra.Command{
		Use:   "registers FILE",
		Short: "The Modbus registers that the monitor of a skid file has for the control system",
		Long: `registers prints the register map that the daemon serves for a skid file with modbus: server: the
head of the skid, alarm state, severity and leak of each valve group, key measures of each end and
throw, the state of each channel.

Addresses are those on the wire, from 0; input registers (function 4) and holding registers
(function 3) hold the same. What lies between is reserved and reads 0. Floats are IEEE 754 pairs,
the high word first unless the skid file says order: cdab; a number that is not known is the quiet
NaN 7FC00000, and its bit under known is 0. Nothing can be written but, where the skid file allows
it, the acknowledge coils (function 5).

Alarms that come this way are advice, never a trip. Before anybody touches a valve or transducer
because of one: isolate, depressurise and lock out; follow site permits, local codes and licensed
practice.`,
		Example: `  lapwing registers skid.yaml
  lapwing registers skid.yaml --csv > registers.csv`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			sk, err := skid.Load(args[0])
			if err != nil {
				return err
			}
			m := plant.NewMap(sk)
			if asCSV {
				return m.CSV(cmd.OutOrStdout())
			}
			if err := m.Table(cmd.OutOrStdout()); err != nil {
				return err
			}
			if sk.Modbus.Server.Listen == "" {
				fmt.Fprintln(cmd.OutOrStdout(), "\nThe skid file has no modbus: server: nothing serves these registers yet.")
			}
			return nil
		},
	}
	cmd.Flags().BoolVar(&asCSV, "csv", false, "as CSV, for other programs")
	return cmd
}
