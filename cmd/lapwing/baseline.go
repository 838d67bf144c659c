package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"os"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"lapwing/internal/duty"
	"lapwing/internal/panel"
	"lapwing/internal/station"
	"lapwing/internal/wire"
)

// baselines is where the tool finds them.
type baselines struct{ daemon, state string }

func baselineCommand() *cobra.Command {
	var b baselines
	cmd := &cobra.Command{
		Use:   "baseline",
		Short: "Learn, look at, compare and exchange what the machine shows when healthy",
		Long: `baseline handles what the machine showed when a person declared it healthy, and what every
later turn is compared with. A learning run is started, watched, and then accepted or thrown away;
until it is accepted it changes no judgement. A baseline that is in force never changes by itself.

  lapwing baseline learn --by NAME             the next steady turns are healthy
  lapwing baseline status                      how far it is, what is missing, what is doubtful
  lapwing baseline accept --by NAME            put it in force;  drop throws it away
  lapwing baseline renew t1.he.suction --by NAME   after work on one part: that part alone

It asks the running daemon. When the daemon is down, list, show, compare, export and import work on
its state folder (--state).

Declaring a machine healthy is a person's judgement: a leak that is there while it is learnt is
normal from then on. Look at the doubts first. Monitoring only. Before anybody touches a valve or
transducer: isolate, depressurise and lock out; follow site permits, local codes and licensed practice.`,
	}
	cmd.PersistentFlags().StringVar(&b.daemon, "daemon", "http://127.0.0.1:8411", "address of the running daemon's page")
	cmd.PersistentFlags().StringVar(&b.state, "state", "", "use this state folder instead (the daemon must be down)")
	cmd.AddCommand(b.listCommand(), b.showCommand(), b.compareCommand(), b.exportCommand(), b.importCommand(), b.statusCommand(),
		b.learnCommand(), b.acceptCommand(), b.dropCommand(), b.renewCommand())
	return cmd
}

func (b *baselines) listCommand() *cobra.Command {
	return &cobra.Command{
		Use: "list", Short: "List the stored baselines, oldest first", Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			list, err := b.list(cmd.Context())
			if err != nil {
				return err
			}
			w := cmd.OutOrStdout()
			if len(list) == 0 {
				fmt.Fprintln(w, "no baseline is stored")
				return nil
			}
			tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
			fmt.Fprintln(tw, "ID\tIN FORCE\tMADE\tHOW\tBY\tTURNS\tMEASURES\tDOUBTS\tNOTE")
			for _, l := range list {
				force := "-"
				if l.InForce {
					force = "yes"
				}
				if l.Unusable != "" {
					l.Note = strings.TrimSpace(l.Note + " (cannot be used: " + l.Unusable + ")")
				}
				fmt.Fprintf(tw, "%d\t%s\t%s\t%s\t%s\t%d–%d\t%d\t%d\t%s\n", l.ID, force, l.Created.UTC().Format("2006-01-02 15:04:05Z"), orDash(l.Kind, l.Subject), orDash(l.By), l.FirstTurn, l.LastTurn, l.Measures, len(l.Doubts), l.Note)
			}
			return tw.Flush()
		},
	}
}

func orDash(parts ...string) string {
	if s := strings.TrimSpace(strings.Join(parts, " ")); s != "" {
		return s
	}
	return "-"
}

func (b *baselines) list(ctx context.Context) (out []wire.Baseline, err error) {
	if b.state != "" {
		return station.BaselinesIn(b.state)
	}
	return out, b.ask(ctx, "/api/v1/baselines", &out)
}

func (b *baselines) ask(ctx context.Context, path string, v any) error {
	body, err := get(ctx, b.daemon, path)
	if err != nil {
		return err
	}
	defer body.Close()
	if err := json.NewDecoder(io.LimitReader(body, 64<<20)).Decode(v); err != nil {
		return fmt.Errorf("the daemon's answer is not readable: %w", err)
	}
	return nil
}

// file gives a baseline by number, or from a file.
func (b *baselines) file(ctx context.Context, name string) ([]byte, error) {
	id, err := strconv.ParseUint(name, 10, 64)
	switch {
	case err != nil:
		return os.ReadFile(name)
	case b.state != "":
		return station.BaselineIn(b.state, id)
	}
	body, err := get(ctx, b.daemon, fmt.Sprintf("/api/v1/baselines/%d", id))
	if err != nil {
		return nil, err
	}
	defer body.Close()
	return io.ReadAll(io.LimitReader(body, 64<<20))
}

func (b *baselines) load(ctx context.Context, name string) (*duty.Baseline, error) {
	raw, err := b.file(ctx, name)
	if err != nil {
		return nil, err
	}
	return duty.ParseBaseline(raw)
}

func (b *baselines) exportCommand() *cobra.Command {
	return &cobra.Command{
		Use: "export ID FILE", Short: "Write a stored baseline to a file", Args: cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			raw, err := b.file(cmd.Context(), args[0])
			if err != nil {
				return err
			}
			if _, err := duty.ParseBaseline(raw); err != nil {
				return err
			}
			_, err = save(args[1], bytes.NewReader(raw))
			return err
		},
	}
}

func (b *baselines) statusCommand() *cobra.Command {
	return &cobra.Command{
		Use: "status", Short: "How far a learning run is, what is missing, what is doubtful", Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if b.state != "" {
				return errors.New("a learning run needs the running daemon: leave --state out")
			}
			var l wire.Learning
			if err := b.ask(cmd.Context(), "/api/v1/learning", &l); err != nil {
				return err
			}
			printLearning(cmd.OutOrStdout(), &l)
			return nil
		},
	}
}

func printLearning(w io.Writer, l *wire.Learning) {
	fmt.Fprintln(w, l.Said)
	if l.State != "none" {
		fmt.Fprintf(w, "%s, by %s\n", orDash(l.Kind, l.Subject), orDash(l.By))
	}
	if len(l.Coverage) > 0 {
		tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
		fmt.Fprintln(tw, "THROW\tLOAD STEP\tTURNS\tRATIO\tRPM\tSUCTION bar abs\tSTILL MISSING")
		for _, c := range l.Coverage {
			step := strconv.Itoa(c.LoadStep)
			if c.Inferred {
				step += " (by the traces)"
			}
			fmt.Fprintf(tw, "%s\t%s\t%d of %d\t%s\t%s\t%s\t%s\n", c.Throw, step, c.Turns, c.Want, span(c.Ratio, 2), span(c.RPM, 0), span(c.Ps, 2), orDash(c.Missing))
		}
		_ = tw.Flush()
	}
	if l.Proposed != nil {
		fmt.Fprintf(w, "waiting for a word: learnt from turns %d to %d, %d measures\n", l.Proposed.FirstTurn, l.Proposed.LastTurn, l.Proposed.Measures)
		for _, d := range l.Proposed.Doubts {
			fmt.Fprintln(w, "  doubt: "+d)
		}
	}
	for _, d := range l.Drifting {
		fmt.Fprintf(w, "%s %s has moved %s slowly and stayed there\n", d.Subject, d.Measure, d.Way)
	}
	if l.InForce != nil {
		fmt.Fprintf(w, "in force: baseline %d of %s, %s\n", l.InForce.ID, l.InForce.Created.UTC().Format("2006-01-02 15:04:05Z"), orDash(l.InForce.Kind, l.InForce.Subject))
		for _, d := range l.InForce.Doubts {
			fmt.Fprintln(w, "  doubt: "+d)
		}
	}
}

func span(x *[2]float64, digits int) string {
	if x == nil {
		return "-"
	}
	return fmt.Sprintf("%.*f–%.*f", digits, x[0], digits, x[1])
}

// give sends an order about learning to the daemon.
func (b *baselines) give(ctx context.Context, w io.Writer, o wire.Order) error {
	if b.state != "" {
		return errors.New("an order needs the running daemon: leave --state out")
	}
	if err := o.Check(); err != nil {
		return err
	}
	raw, err := json.Marshal(o)
	if err != nil {
		return err
	}
	return b.post(ctx, w, "/api/v1/orders", raw)
}

// post sends what the daemon answers as an order.
func (b *baselines) post(ctx context.Context, w io.Writer, path string, raw []byte) error {
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, strings.TrimRight(b.daemon, "/")+path, bytes.NewReader(raw))
	if err != nil {
		return err
	}
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set(panel.OrderHeader, "tool")
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return fmt.Errorf("the daemon does not answer: %w", err)
	}
	defer resp.Body.Close()
	body, err := io.ReadAll(io.LimitReader(resp.Body, 1<<20))
	if err != nil {
		return err
	}
	var r wire.Receipt
	if json.Unmarshal(body, &r) != nil || r.Type != "act" {
		return fmt.Errorf("the daemon says: %s", strings.TrimSpace(string(body)))
	}
	if !r.Accepted {
		return fmt.Errorf("refused: %s", r.Said)
	}
	fmt.Fprintln(w, r.Said)
	if !r.OnDisk {
		fmt.Fprintln(w, "it is not on disk yet")
	}
	return nil
}
