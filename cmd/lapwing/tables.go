package main

import (
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"lapwing/internal/station"
	"lapwing/internal/table"
)

func tablesCommand() *cobra.Command {
	var o station.TablesOptions
	var what, format, learn string
	cmd := &cobra.Command{
		Use:   "tables --skid FILE --to DIR REC.wav",
		Short: "Write a recording and what came of it as CSV or Parquet for other programs",
		Long: `tables runs the daemon's own line over a recording and writes tables that other programs open:

  measures   every measure of every turn, one a row; with --learn or --baseline its expected
             value and spread at that duty
  events     every valve event of every turn with its angles and window
  alarms     every alarm transition
  angles     pressures, volumes and vibration peaks over crank angle
  samples    the recording as it was sampled, in counts (scales are in Parquet's metadata)

They lie in DIR/<table>/site=…/skid=…/date=…/, which a query engine takes as partitions: many
skids written to one folder are one table. Times are UTC.`,
		Example: `  lapwing tables --skid clip.skid.yaml --process clip.process.csv --to lake clip.wav
  lapwing tables --skid s.yaml --learn 0:600 --what measures,alarms --as csv --to out rec.wav`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			o.Review.Recording, o.Format, o.What = args[0], table.Format(format), strings.Split(what, ",")
			if o.Review.LearnFrom, o.Review.LearnTo, err = parseTurns("--learn", learn); err != nil {
				return err
			}
			o.Review.Summary = cmd.OutOrStdout()
			if st, serr := os.Stderr.Stat(); serr == nil && st.Mode()&os.ModeCharDevice != 0 {
				o.Review.Progress = os.Stderr
			}
			files, err := station.Tables(cmd.Context(), o)
			for _, f := range files {
				fmt.Fprintln(cmd.OutOrStdout(), f)
			}
			return err
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.Review.SkidFile, "skid", "", "skid file of the recording (required)")
	f.StringVar(&o.Dir, "to", "", "folder to write into (required)")
	f.StringVar(&format, "as", "parquet", "parquet or csv")
	f.StringVar(&what, "what", "measures,events,alarms", "tables, separated by commas: "+strings.Join(station.TableNames, ", "))
	f.StringVar(&o.Review.ProcessCSV, "process", "", "process values over time (CSV); without it the skid file's")
	f.StringVar(&learn, "learn", "", "turns declared healthy, FIRST:END (END not included)")
	f.BoolVar(&o.Review.Cold, "cold", false, "start without the state beside a pulled clip, as lapwing review --cold does")
	f.StringVar(&o.Review.Baseline, "baseline", "", "baseline file to judge by (JSON), instead of learning")
	_ = cmd.MarkFlagRequired("skid")
	_ = cmd.MarkFlagRequired("to")
	return cmd
}
