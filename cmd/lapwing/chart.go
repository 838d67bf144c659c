package main

import (
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"lapwing/internal/chart"
	"lapwing/internal/station"
)

func chartCommand() *cobra.Command {
	o := station.ChartOptions{Turn: -1, Reference: -1}
	var overlay, learn string
	var night bool
	cmd := &cobra.Command{
		Use:   "chart KIND [SUBJECT] REC.wav --skid FILE -o CHART.svg",
		Short: "Draw a turn, a trend or a spectrum of a recording as SVG, PNG or PDF",
		Long: `chart runs the daemon's own line over a recording and draws what came of it.

  angle [THROW]     pressures over crank angle, the valves' windows, each accelerometer below
  pv [THROW]        pressure over volume
  logpv [THROW]     the same on logarithmic axes, with the line and exponent of each closed stroke
  load [THROW]      gas load and load at the crosshead pin, rated loads, reversal
  trend MEASURE     one measure over time, <subject>/<name> as in the turn records; with --learn
                    or --baseline the band expected at each turn's duty, and the alarms
  spectrum CHANNEL  density of a channel's raw signal

SUBJECT may be left out for the first throw. The turn drawn is the last good one unless --turn
says another; --overlay lays more turns over it, --reference sets a healthy one behind it, from
the same recording or, with --against, from another one: event against reference.

Monitoring only. Before anybody touches a valve or transducer because of a chart: isolate,
depressurise and lock out; follow site permits, local codes and licensed practice.`,
		Example: `  lapwing chart angle t1 clip.wav --skid clip.skid.yaml --process clip.process.csv -o event.svg
  lapwing chart logpv event.wav --skid event.skid.yaml --against healthy.wav -o pv.pdf
  lapwing chart trend t1.he.suction/leak_area_mm2 clip.wav --skid clip.skid.yaml --baseline base.json -o leak.png`,
		Args: cobra.RangeArgs(2, 3),
		ValidArgsFunction: func(_ *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
			if len(args) == 0 {
				return station.ChartKinds, cobra.ShellCompDirectiveNoFileComp
			}
			return nil, cobra.ShellCompDirectiveDefault
		},
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			o.Kind, o.Review.Recording = args[0], args[len(args)-1]
			if len(args) == 3 {
				o.Subject = args[1]
			} else if o.Kind == "trend" || o.Kind == "spectrum" {
				return fmt.Errorf("chart %s: say of what: lapwing chart %s SUBJECT REC.wav", o.Kind, o.Kind)
			}
			if o.Turns[0], o.Turns[1], err = parseTurns("--overlay", overlay); err != nil {
				return err
			}
			if o.Review.LearnFrom, o.Review.LearnTo, err = parseTurns("--learn", learn); err != nil {
				return err
			}
			if night {
				o.Draw.Theme = chart.Night
			}
			if st, serr := os.Stderr.Stat(); serr == nil && st.Mode()&os.ModeCharDevice != 0 {
				o.Review.Progress = os.Stderr
			}
			if err := station.Chart(cmd.Context(), o); err != nil {
				return err
			}
			fmt.Fprintln(cmd.OutOrStdout(), o.Out)
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.Review.SkidFile, "skid", "", "skid file of the recording (required)")
	f.StringVarP(&o.Out, "out", "o", "", "file to write; its ending, .svg, .png or .pdf, gives the format (required)")
	f.StringVar(&o.Review.ProcessCSV, "process", "", "process values over time (CSV); without it the skid file's")
	f.Int64Var(&o.Turn, "turn", -1, "number of the turn to draw; -1: the last good one")
	f.StringVar(&overlay, "overlay", "", "more turns laid over it, FIRST:END (END not included)")
	f.Int64Var(&o.Reference, "reference", -1, "number of a turn to set behind it")
	f.StringVar(&o.Against, "against", "", "recording that the reference is taken from; its last turn of the most alike duty unless --reference says another")
	f.StringVar(&learn, "learn", "", "trend: turns declared healthy, FIRST:END")
	f.StringVar(&o.Review.Baseline, "baseline", "", "trend: baseline file to compare with")
	f.Float64Var(&o.Draw.From, "from", 0, "first angle shown, degrees")
	f.Float64Var(&o.Draw.To, "to", 0, "last angle shown, degrees; with neither the whole turn is")
	f.Float64Var(&o.Draw.WidthMM, "width-mm", 0, "width; 0: what suits the chart")
	f.Float64Var(&o.Draw.HeightMM, "height-mm", 0, "height; 0: what suits the chart")
	f.BoolVar(&o.Review.Cold, "cold", false, "start without the state beside a pulled clip, as lapwing review --cold does")
	f.BoolVar(&night, "night", false, "on a dark ground")
	_ = cmd.MarkFlagRequired("skid")
	_ = cmd.MarkFlagRequired("out")
	_ = cmd.RegisterFlagCompletionFunc("out", func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
		return []string{"svg", "png", "pdf"}, cobra.ShellCompDirectiveFilterFileExt
	})
	return cmd
}
