package main

import (
	"errors"
	"fmt"
	"io"
	"net/url"
	"os"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/station"
)

func (b *baselines) showCommand() *cobra.Command {
	var skidFile string
	cmd := &cobra.Command{
		Use: "show ID|FILE", Short: "Where a baseline came from, what it has seen, what it expects", Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			base, err := b.load(cmd.Context(), args[0])
			if err != nil {
				return err
			}
			w := cmd.OutOrStdout()
			printBaseline(w, base)
			if skidFile == "" {
				fmt.Fprintln(w, "what it expects of each measure: name the skid file with --skid")
				return nil
			}
			sk, err := skid.Load(skidFile)
			if err != nil {
				return err
			}
			layout := station.LayoutOf(sk)
			if _, err := base.Reference(layout); err != nil {
				return err
			}
			return printExpected(w, base, layout)
		},
	}
	cmd.Flags().StringVar(&skidFile, "skid", "", "skid file, for the measures")
	return cmd
}

func printBaseline(w io.Writer, b *duty.Baseline) {
	fmt.Fprintf(w, "%s, made %s, from turns %d to %d\n", orDash(string(b.Kind), b.Subject), b.Created.UTC().Format("2006-01-02 15:04:05Z"), b.Turn0, b.Turn1)
	fmt.Fprintf(w, "by %s; %s\n", orDash(b.By), orDash(b.Note))
	fmt.Fprintf(w, "skid file %s\n", b.SkidHash)
	for _, d := range b.Doubts {
		fmt.Fprintln(w, "doubt: "+d.String())
	}
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	fmt.Fprintln(tw, "THROW\tLOAD STEP\tTURNS\tRATIO\tRPM\tSUCTION bar abs\tMEASURES")
	for i := range b.Cells {
		c := &b.Cells[i]
		step := fmt.Sprint(c.Step)
		if c.Inferred {
			step += " (by the traces)"
		}
		ratio, rpm, ps := c.Region()
		fmt.Fprintf(tw, "%d\t%s\t%d\t%.2f–%.2f\t%.0f–%.0f\t%.2f–%.2f\t%d\n", c.Throw+1, step, c.Turns, ratio[0], ratio[1], rpm[0], rpm[1], ps[0]/1e5, ps[1]/1e5, len(c.Models))
	}
	_ = tw.Flush()
}

func printExpected(w io.Writer, b *duty.Baseline, layout measure.Layout) error {
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	for i := range b.Cells {
		c := &b.Cells[i]
		if c.Inferred {
			continue
		}
		fmt.Fprintf(tw, "\nthrow %d, load step %d, in the middle of what was seen:\t\t\t\n", c.Throw+1, c.Step)
		fmt.Fprintln(tw, "SUBJECT\tMEASURE\tEXPECTED\tSPREAD OF A BLOCK")
		for _, f := range layout {
			if v, s, ok := c.Expected(f.Subject, f.Name); ok && f.Throw == c.Throw {
				fmt.Fprintf(tw, "%s\t%s\t%.4g\t%.2g\n", f.Subject, f.Name, v*f.Scale+f.Shift, s*f.Scale)
			}
		}
	}
	return tw.Flush()
}

func (b *baselines) compareCommand() *cobra.Command {
	var skidFile string
	var least float64
	cmd := &cobra.Command{
		Use: "compare OLDER NEWER", Short: "What two baselines (numbers or files) expect differently", Args: cobra.ExactArgs(2),
		Long: `compare lists the measures of every load step that both baselines have, at a duty that both have seen,
by how many spreads of a block they differ: a measure that has moved by more than about three of
them would have been noticed.`,
		RunE: func(cmd *cobra.Command, args []string) error {
			older, err := b.load(cmd.Context(), args[0])
			if err != nil {
				return err
			}
			newer, err := b.load(cmd.Context(), args[1])
			if err != nil {
				return err
			}
			if older.LayoutHash != newer.LayoutHash {
				return errors.New("they belong to machines or versions with other measures: nothing can be compared")
			}
			var layout measure.Layout
			if skidFile != "" {
				sk, err := skid.Load(skidFile)
				if err != nil {
					return err
				}
				layout = station.LayoutOf(sk)
				if _, err := older.Reference(layout); err != nil {
					return err
				}
			}
			return printChanges(cmd.OutOrStdout(), older, newer, layout, least)
		},
	}
	cmd.Flags().StringVar(&skidFile, "skid", "", "skid file, for values in the units people read")
	cmd.Flags().Float64Var(&least, "least", 2, "spreads below which a difference is not listed")
	return cmd
}

func printChanges(w io.Writer, older, newer *duty.Baseline, layout measure.Layout, least float64) error {
	if older.SkidHash != newer.SkidHash {
		fmt.Fprintln(w, "they were learnt with different versions of the skid file")
	}
	for _, s := range older.Only(newer) {
		fmt.Fprintln(w, s)
	}
	all, shown := older.Compare(newer), 0
	for _, c := range duty.Largest(all) {
		if c.Spreads < least && c.Spreads > -least {
			continue
		}
		shown++
		at := fmt.Sprintf("load step %d, %.0f rpm, ratio %.2f: ", c.Step, c.RPM, c.Pd/c.Ps)
		if layout != nil {
			fmt.Fprintln(w, at+c.Words(layout))
		} else {
			fmt.Fprintf(w, "%s%s %s by %+.1f spreads\n", at, c.Subject, c.Name, c.Spreads)
		}
	}
	fmt.Fprintf(w, "%d of %d measures differ by %g spreads or more\n", shown, len(all), least)
	return nil
}

func (b *baselines) importCommand() *cobra.Command {
	var skidFile, by, reason string
	var other bool
	cmd := &cobra.Command{
		Use: "import FILE", Short: "Hand a baseline file to the daemon, where it waits to be accepted", Args: cobra.ExactArgs(1),
		Long: `import hands a baseline file to the running daemon, where it waits to be accepted or dropped as what a
learning run gave. It is refused when it was learnt with other measures, or with another version of
the skid file: --other-skid lets that pass, for a file in which nothing about the machine, its gas or
its channels has changed. With --state (and --skid, to check by) it is stored in the state folder of a
daemon that is down, which judges by it when it is started.`,
		RunE: func(cmd *cobra.Command, args []string) error {
			if b.state == "" {
				raw, err := os.ReadFile(args[0])
				if err != nil {
					return err
				}
				q := url.Values{"by": {by}, "reason": {reason}}
				if other {
					q.Set("other_skid", "yes")
				}
				return b.post(cmd.Context(), cmd.OutOrStdout(), "/api/v1/baselines?"+q.Encode(), raw)
			}
			if skidFile == "" {
				return errors.New("name the skid file to check by with --skid")
			}
			sk, err := skid.Load(skidFile)
			if err != nil {
				return err
			}
			base, err := station.LoadBaseline(args[0], sk, other)
			if err != nil {
				return err
			}
			id, err := station.ImportInto(b.state, base, by, reason)
			if err != nil {
				return err
			}
			fmt.Fprintf(cmd.OutOrStdout(), "stored as baseline %d\n", id)
			for _, d := range base.Doubts {
				fmt.Fprintln(cmd.OutOrStdout(), "doubt: "+d.String())
			}
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&skidFile, "skid", "", "skid file of the machine, with --state")
	f.StringVar(&by, "by", "", "who imports it (required)")
	f.StringVar(&reason, "reason", "", "why (required)")
	f.BoolVar(&other, "other-skid", false, "take one that was learnt with another version of the skid file")
	for _, n := range []string{"by", "reason"} {
		_ = cmd.MarkFlagRequired(n)
	}
	return cmd
}
