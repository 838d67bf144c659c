package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"lapwing/internal/station"
	"lapwing/internal/wire"
)

func alarmsCommand() *cobra.Command {
	var daemon, state string
	var all, raw bool
	cmd := &cobra.Command{
		Use:   "alarms",
		Short: "Show what stands, what is shelved or out of service, and the keys to name them by",
		Long: `alarms lists the alarm points that ask something of a person, and those that somebody has hidden. The key
is what ack, shelve and the other orders take.

It asks the running daemon. When the daemon is down, name its state folder with --state.
` + orderCaution,
		Example: `  lapwing alarms
  lapwing alarms --all`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			a, err := listAlarms(cmd.Context(), daemon, state)
			if err != nil {
				return err
			}
			if raw {
				return json.NewEncoder(cmd.OutOrStdout()).Encode(a)
			}
			return printAlarms(cmd.OutOrStdout(), &a, all)
		},
	}
	f := cmd.Flags()
	daemonFlag(cmd, &daemon)
	f.StringVar(&state, "state", "", "read this state folder instead (the daemon must be down)")
	f.BoolVar(&all, "all", false, "also the points that are normal")
	f.BoolVar(&raw, "json", false, "as JSON")
	return cmd
}

func listAlarms(ctx context.Context, daemon, state string) (a wire.Alarms, err error) {
	if state != "" {
		return station.AlarmsIn(state)
	}
	err = getJSON(ctx, daemon, "/api/v1/alarms", &a)
	return a, err
}

// getJSON asks the daemon for something.
func getJSON(ctx context.Context, daemon, path string, v any) error {
	body, err := get(ctx, daemon, path)
	if err != nil {
		return err
	}
	defer body.Close()
	if err := json.NewDecoder(io.LimitReader(body, 64<<20)).Decode(v); err != nil {
		return fmt.Errorf("the daemon's answer is not readable: %w", err)
	}
	return nil
}

func printAlarms(w io.Writer, a *wire.Alarms, all bool) error {
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	n := 0
	for i := range a.Points {
		p := &a.Points[i]
		if !all && (p.State == "normal" || p.State == "unknown") {
			continue
		}
		if n++; n == 1 {
			fmt.Fprintln(tw, "KEY\tSTATE\tSEVERITY\tSINCE\tSAID")
		}
		said, severity := p.Sentence, p.Severity
		switch {
		case p.Out != nil:
			said, severity = fmt.Sprintf("by %s: %s (behind it: %s, %s)", p.Out.By, p.Out.Reason, p.Behind, p.Level), "-"
		case p.Shelf != nil:
			said, severity = fmt.Sprintf("until %s by %s: %s (behind it: %s, %s)", p.Shelf.Until.UTC().Format("2006-01-02 15:04Z"), p.Shelf.By, p.Shelf.Reason, p.Behind, p.Level), "-"
		case p.ByDesign != "":
			said, severity = p.ByDesign+" (behind it: "+p.Behind+", "+p.Level+")", "-"
		case p.State == "normal" || p.State == "unknown":
			said, severity = "", "-"
		}
		fmt.Fprintf(tw, "%s\t%s\t%s\t%s\t%s\n", p.Key, p.State, severity, dated(p.Since), said)
	}
	if n == 0 {
		fmt.Fprintln(tw, "no alarm stands, and none is hidden")
	}
	if a.Flood {
		fmt.Fprintln(tw, "ALARM FLOOD: more alarms have come within ten minutes than a person can follow; begin with the first of them.")
	}
	return tw.Flush()
}

func dated(t time.Time) string {
	if t.IsZero() {
		return "-"
	}
	return t.UTC().Format("2006-01-02 15:04:05Z")
}
