package main

import (
	"fmt"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"lapwing/internal/station"
)

func reviewCommand() *cobra.Command {
	var o station.ReviewOptions
	var learn, out string
	cmd := &cobra.Command{
		Use:   "review --skid FILE REC.wav",
		Short: "Run the whole line on a recording, offline, as fast as it goes",
		Long: `review runs the daemon's own line on a recording: one JSON record per turn (events, windows,
measures), one per finding and per alarm transition, and a summary on the terminal. The same
samples with the same process values give the same turn records as the live daemon, bit for bit.
Times (t_s) are seconds from the first sample of the recording, also those of the process file.

A pulled clip has a .state file beside it: what the live line knew at its first sample, baseline and
alarm states too. The review goes on from there, and its records are the live ones bit for bit, also
turn numbers and times. It fits the version of the program that took it; --cold does without.

Without a state and without --learn (or --baseline) there is nothing to compare with: turns are
measured, not judged.
Pressures in the process file are absolute; its columns are those of a pulled clip.

With --why FILE it also writes, for every turn and throw, what it was compared with and which measures were
off, or why it was not compared; and for every block of turns, how each hypothesis was weighed on which
evidence, raised or not.

Monitoring only. Before anybody touches a valve or transducer because of a finding: isolate,
depressurise and lock out; follow site permits, local codes and licensed practice.`,
		Example: `  lapwing review --skid skid.yaml rec.wav --process process.csv --learn 0:200 --out turns.jsonl`,
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			o.Recording = args[0]
			if o.LearnFrom, o.LearnTo, err = parseTurns("--learn", learn); err != nil {
				return err
			}
			o.Summary = cmd.OutOrStdout()
			if out == "-" {
				o.Out, o.Summary = cmd.OutOrStdout(), cmd.ErrOrStderr()
			} else {
				o.OutFile = out
			}
			if st, serr := os.Stderr.Stat(); serr == nil && st.Mode()&os.ModeCharDevice != 0 {
				o.Progress = os.Stderr
			}
			return station.Review(cmd.Context(), o)
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.SkidFile, "skid", "", "skid file of the recording (required)")
	f.StringVar(&o.ProcessCSV, "process", "", "process values over time (CSV); without it the skid file's")
	f.StringVar(&learn, "learn", "", "turns declared healthy, FIRST:END (END not included), e.g. 0:200")
	f.StringVar(&o.Baseline, "baseline", "", "baseline file to judge by (JSON), instead of learning")
	f.StringVar(&o.SaveBaseline, "save-baseline", "", "write the learnt baseline here")
	f.StringVar(&o.State, "state", "", "state of the line to go on from; without it the .state file beside the recording")
	f.BoolVar(&o.Cold, "cold", false, "start without a state, as if the monitor had just been switched on")
	f.StringVar(&out, "out", "", "file for the records, one JSON object a line; - for standard output")
	f.StringVar(&o.WhyFile, "why", "", "file for the reasons: what each turn was compared with, and how every hypothesis was weighed (JSON lines)")
	_ = cmd.MarkFlagRequired("skid")
	return cmd
}

// parseTurns reads FIRST:END of a flag.
func parseTurns(flag, s string) (from, to int64, err error) {
	if s == "" {
		return 0, 0, nil
	}
	a, b, ok := strings.Cut(s, ":")
	if ok {
		if from, err = strconv.ParseInt(a, 10, 64); err == nil {
			to, err = strconv.ParseInt(b, 10, 64)
		}
	}
	if !ok || err != nil || from < 0 || to <= from {
		return 0, 0, fmt.Errorf("%s %q: write FIRST:END with whole turn numbers, END above FIRST, e.g. 0:200", flag, s)
	}
	return from, to, nil
}
