package main

import (
	"context"
	"encoding/csv"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lapwing/internal/station"
	"lapwing/internal/wire"
)

func journalCommand() *cobra.Command {
	var daemon, state, from, to, severity, format, out string
	var last time.Duration
	var f wire.JournalFilter
	var most int
	cmd := &cobra.Command{
		Use:   "journal",
		Short: "List or export the journal: every alarm transition and every act of a person",
		Long: `journal lists who did what, when and why: every transition of an alarm point and every order, carried out
or refused. Without bounds it shows the newest 40; with --format csv or jsonl it exports everything that the filter
keeps, oldest first.

It asks the running daemon. When the daemon is down, name its state folder with --state. Entries stand in the order
in which they happened; times are those of the sample clock.`,
		Example: `  lapwing journal --subject t1.he --severity alert
  lapwing journal --type act --by "A. Operator"
  lapwing journal --from 2030-05-01T00:00:00Z --format csv --out may.csv`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) (err error) {
			if f.From, err = clockFlag("from", from); err != nil {
				return err
			}
			if f.To, err = clockFlag("to", to); err != nil {
				return err
			}
			if last > 0 {
				if !f.From.IsZero() {
					return fmt.Errorf("--last and --from say the same: leave one out")
				}
				f.From = time.Now().Add(-last)
			}
			if severity != "" {
				if err := f.Severity.UnmarshalText([]byte(severity)); err != nil {
					return fmt.Errorf("--severity %q: write advisory, alert or danger", severity)
				}
			}
			if format != "table" && format != "csv" && format != "jsonl" {
				return fmt.Errorf("--format %q: write table, csv or jsonl", format)
			}
			f.Oldest = format != "table"
			f.Details = f.Details && format == "jsonl"
			if !cmd.Flags().Changed("most") && format != "table" {
				most = 0
			}
			page := func(f wire.JournalFilter) (p wire.JournalPage, err error) {
				err = getJSON(cmd.Context(), daemon, "/api/v1/journal?"+f.Query().Encode(), &p)
				return p, err
			}
			if state != "" {
				page = func(f wire.JournalFilter) (wire.JournalPage, error) { return station.JournalIn(state, f) }
			}
			w := cmd.OutOrStdout()
			if out != "" {
				file, err := os.OpenFile(out, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
				if err != nil {
					return err
				}
				defer func() {
					if cerr := file.Close(); err == nil {
						err = cerr
					}
				}()
				w = file
			}
			return writeJournal(cmd.Context(), w, cmd.ErrOrStderr(), format, f, most, page)
		},
	}
	fl := cmd.Flags()
	daemonFlag(cmd, &daemon)
	fl.StringVar(&state, "state", "", "read this state folder instead (the daemon must be down)")
	fl.StringVar(&from, "from", "", "from this time on, e.g. 2030-05-01T06:00:00Z")
	fl.StringVar(&to, "to", "", "before this time")
	fl.DurationVar(&last, "last", 0, "from so long ago, e.g. 8h")
	fl.StringVar(&f.Subject, "subject", "", "this subject and its parts: t1 finds t1.he.suction too")
	fl.StringVar(&f.Key, "key", "", "this alarm point only")
	fl.StringVar(&f.Kind, "kind", "", "this kind, e.g. leaking")
	fl.StringVar(&severity, "severity", "", "transitions of this severity or worse: advisory, alert, danger")
	fl.StringVar(&f.Type, "type", "", "transition or act")
	fl.StringVar(&f.Verb, "verb", "", "acts of this verb, e.g. shelve")
	fl.StringVar(&f.By, "by", "", "what this person did")
	fl.BoolVar(&f.Details, "detail", false, "with the evidence behind each transition (jsonl only)")
	fl.StringVar(&format, "format", "table", "table, csv or jsonl")
	fl.StringVar(&out, "out", "", "file to write; it must not exist yet")
	fl.IntVar(&most, "most", 40, "entries at most; 0: all")
	return cmd
}

// writeJournal writes page after page until nothing is left or most entries stand there; 0: no bound.
func writeJournal(ctx context.Context, w, aside io.Writer, format string, f wire.JournalFilter, most int, page func(wire.JournalFilter) (wire.JournalPage, error)) error {
	var put func([]wire.Entry) error
	switch format {
	case "csv":
		c := csv.NewWriter(w)
		if err := c.Write(wire.JournalColumns); err != nil {
			return err
		}
		put = func(es []wire.Entry) error {
			if err := wire.WriteCSV(c, es); err != nil {
				return err
			}
			c.Flush()
			return c.Error()
		}
	case "jsonl":
		put = func(es []wire.Entry) error { return wire.WriteLines(w, es) }
	default:
		put = func(es []wire.Entry) error { return printEntries(w, es) }
	}
	n, unread := 0, ""
	for {
		f.Limit = wire.MaxPage
		if most > 0 {
			f.Limit = min(f.Limit, most-n)
		}
		p, err := page(f)
		if err != nil {
			return err
		}
		if err := put(p.Entries); err != nil {
			return err
		}
		if n += len(p.Entries); unread == "" {
			unread = p.Unread
		}
		if f.Page = p.Next; f.Page == "" || most > 0 && n >= most || ctx.Err() != nil {
			break
		}
	}
	if n == 0 && format == "table" {
		fmt.Fprintln(w, "no entry")
	}
	if f.Page != "" && format == "table" {
		fmt.Fprintln(aside, "There is more: bound it by --from and --subject, or say --most 0.")
	}
	if unread != "" {
		fmt.Fprintln(aside, "Some records cannot be read:", unread)
	}
	return ctx.Err()
}

// printEntries writes two lines an entry: what happened, and what was said.
func printEntries(w io.Writer, es []wire.Entry) error {
	for i := range es {
		e := &es[i]
		var line, said string
		if e.Type == "act" {
			how := "carried out"
			if e.Accepted != nil && !*e.Accepted {
				how = "REFUSED"
			}
			about := strings.TrimSpace(e.Key + " " + e.Clip)
			if about == "" {
				about = e.Subject
			}
			line = fmt.Sprintf("%s  a%d  %s %s: %s, by %s (%s)", dated(e.At), e.ID, e.Verb, about, how, e.By, e.Via)
			said = e.Said
		} else {
			line = fmt.Sprintf("%s  %d  %s  %s → %s", dated(e.At), e.ID, e.Key, e.From, e.To)
			if e.Severity != "none" {
				line += ", " + e.Severity
			}
			if e.By != "" {
				line += ", by " + e.By
			}
			if said = e.Sentence; e.Note != "" {
				said = strings.TrimPrefix(said+" ("+e.Note+")", " ")
			}
		}
		if _, err := fmt.Fprintln(w, line); err != nil {
			return err
		}
		if said != "" {
			if _, err := fmt.Fprintln(w, "    "+said); err != nil {
				return err
			}
		}
	}
	return nil
}
