package main

import (
	"encoding/json"
	"fmt"
	"io"
	"net/url"
	"strconv"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"lapwing/internal/wire"
)

func whyCommand() *cobra.Command {
	var daemon string
	var turn int64
	var raw, full bool
	cmd := &cobra.Command{
		Use:   "why [SUBJECT]",
		Short: "Ask why something was found, or why nothing was",
		Long: `why asks the running daemon for its reasons. For a subject (a valve group, a throw, a channel, or an alarm's
key): which measures speak for and against, what was expected at that duty, how far off they are in spreads,
what each weighs, and what the next grade would take; with --full also turn by turn. Without a subject: how
every hypothesis stands. With --turn: the block that holds this turn, or why the turn was not compared.

The daemon keeps the reasons of the last minute or so. For older ones: lapwing review --why on the clip.
` + orderCaution,
		Example: `  lapwing why t1.he.suction
  lapwing why t1.he.suction --full
  lapwing why --turn 4711`,
		Args: cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			q := url.Values{}
			if len(args) > 0 {
				q.Set("subject", args[0])
			}
			if turn != 0 {
				q.Set("turn", strconv.FormatInt(turn, 10))
			}
			var w wire.Why
			if err := getJSON(cmd.Context(), daemon, "/api/v1/why?"+q.Encode(), &w); err != nil {
				return err
			}
			if raw {
				return json.NewEncoder(cmd.OutOrStdout()).Encode(w)
			}
			return printWhy(cmd.OutOrStdout(), &w, full)
		},
	}
	f := cmd.Flags()
	daemonFlag(cmd, &daemon)
	f.Int64Var(&turn, "turn", 0, "this turn; else the newest")
	f.BoolVar(&full, "full", false, "also every hypothesis and every turn")
	f.BoolVar(&raw, "json", false, "as JSON")
	return cmd
}

func printWhy(w io.Writer, a *wire.Why, full bool) error {
	for _, s := range a.Said {
		fmt.Fprintln(w, s)
	}
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	n := len(a.Blocks)
	for i := range a.Blocks {
		b := &a.Blocks[i]
		if !full && a.Subject != "" && i < n-1 {
			continue
		}
		fmt.Fprintf(tw, "\n%s, turns %d to %d, load step %d", b.Throw, b.Turns[0], b.Turns[1], b.Step)
		if b.RPM != nil {
			fmt.Fprintf(tw, ", %.0f rpm", *b.RPM)
		}
		if b.Ps != nil && b.Pd != nil {
			fmt.Fprintf(tw, ", %.2f to %.2f bar abs", *b.Ps, *b.Pd)
		}
		if !b.Settled {
			fmt.Fprint(tw, ", duty moving: deviations count for less")
		}
		fmt.Fprintln(tw)
		for k := range b.Cases {
			if c := &b.Cases[k]; full || c.Grade != "none" || a.Subject != "" {
				printCase(tw, c, full)
			}
		}
	}
	if full && len(a.Turns) > 0 {
		fmt.Fprintln(tw)
		for i := range a.Turns {
			t := &a.Turns[i]
			said := t.Duty
			if !t.Compared {
				said = "not compared: " + t.Why
			}
			fmt.Fprintf(tw, "turn %d\t%s\tstep %d\t%s\n", t.Turn, t.Throw, t.Step, said)
			for _, m := range t.Measures {
				fmt.Fprintf(tw, "\t%s\t%s for %s\t%s spreads\n", m.Measure, number(m.Value, "%.5g"), number(m.Expected, "%.5g"), number(m.Spreads, "%+.1f"))
			}
		}
	}
	return tw.Flush()
}

func printCase(tw io.Writer, c *wire.WhyCase, full bool) {
	fmt.Fprintf(tw, "  %s %s: %s\n", c.Subject, c.Kind, c.Grade)
	if !c.Judged {
		fmt.Fprintf(tw, "    not judged: %s\n", c.Why)
		return
	}
	for _, v := range c.Classes {
		if v.Weight == nil && !full {
			continue
		}
		fmt.Fprintf(tw, "    %s\t%s in this block, %s over the last ones\t%s\n", v.Class, number(v.Weight, "%.1f"), number(v.Median, "%.1f"), v.Why)
	}
	quiet := 0
	for _, e := range c.Evidence {
		if !full && (e.Spreads == nil || *e.Spreads < 1 && *e.Spreads > -1) {
			quiet++
			continue
		}
		fmt.Fprintf(tw, "      %s\t%s for %s\t%s spreads\tweighs %s\n", e.Measure, number(e.Value, "%.5g"), number(e.Expected, "%.5g"), number(e.Spreads, "%+.1f"), number(e.Weight, "%.1f"))
	}
	if quiet > 0 {
		fmt.Fprintf(tw, "      %d other measures are within one spread of what is expected (--full shows them)\n", quiet)
	}
	for _, m := range c.Missing {
		fmt.Fprintf(tw, "    %s\n", m)
	}
}

func number(x *float64, format string) string {
	if x == nil {
		return "–"
	}
	return fmt.Sprintf(format, *x)
}
