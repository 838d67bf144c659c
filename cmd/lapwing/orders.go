package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lapwing/internal/panel"
	"lapwing/internal/wire"
)

const orderCaution = `
Alarms inform; nothing of this touches the machine or its protection. Before anybody touches a valve or
transducer: isolate, depressurise and lock out; follow site permits, local codes and licensed practice.`

// orderCommands are the orders about alarm points and clips.
func orderCommands() []*cobra.Command {
	key := cobra.ExactArgs(1)
	return []*cobra.Command{
		orderCommand("ack KEY", "Acknowledge an alarm: a person has seen it", `ack says that a person has seen the alarm. The condition stays as it is; the journal keeps who and when.`,
			`  lapwing ack t1.he.suction/leaking --by "A. Operator" --note "told maintenance"`, key, wire.VerbAcknowledge, "note"),
		orderCommand("reset KEY", "Reset a latched alarm whose condition has gone", `reset takes back a latched alarm that has been acknowledged and whose condition has gone.`,
			`  lapwing reset t1/rod_load_max_kn/high --by "A. Operator"`, key, wire.VerbReset, "note"),
		orderCommand("shelve KEY", "Hide an alarm for a limited time, with a reason", `shelve hides an alarm until a given time, 24 h at most. It goes on being judged; when the shelf ends
while the condition stands, the alarm comes back unacknowledged.`,
			`  lapwing shelve t1.he.suction/leaking --for 8h --reason "valve ordered" --by "A. Operator"`, key, wire.VerbShelve, "reason", "for"),
		orderCommand("unshelve KEY", "End a shelf before its time", `unshelve shows a shelved alarm again.`,
			`  lapwing unshelve t1.he.suction/leaking --by "A. Operator"`, key, wire.VerbUnshelve, "note"),
		orderCommand("out KEY", "Take an alarm point out of service, for maintenance", `out takes an alarm point out of service, with a reason and without an end. It goes on being judged and is not
shown until somebody puts it back (lapwing back). For hours rather than days, shelve.`,
			`  lapwing out t1/discharge_temp_excess_k/high --reason "thermocouple removed" --by "B. Technician"`, key, wire.VerbTakeOut, "reason"),
		orderCommand("back KEY", "Put an alarm point back into service", `back puts a point back into service; what stands comes back unacknowledged.`,
			`  lapwing back t1/discharge_temp_excess_k/high --by "B. Technician"`, key, wire.VerbReturn, "note"),
		orderCommand("cut LABEL", "Protect the raw samples of the last seconds", `cut protects raw samples that the rolling tape would let go, under a label: of the last seconds, or between two
times. lapwing pull fetches them.`,
			`  lapwing cut "odd noise" --last 30s --by "C. Analyst"`, key, wire.VerbCutClip, "reason", "last"),
	}
}

func orderCommand(use, short, long, example string, args cobra.PositionalArgs, verb string, flags ...string) *cobra.Command {
	var daemon string
	var o wire.Order
	var long1, last time.Duration
	var from, to string
	cmd := &cobra.Command{
		Use: use, Short: short, Long: long + "\n" + orderCaution, Example: example, Args: args,
		RunE: func(cmd *cobra.Command, a []string) (err error) {
			o.Verb, o.ForS, o.LastS = verb, long1.Seconds(), last.Seconds()
			if o.From, err = clockFlag("from", from); err != nil {
				return err
			}
			if o.To, err = clockFlag("to", to); err != nil {
				return err
			}
			if verb == wire.VerbCutClip {
				o.Label = a[0]
			} else {
				o.Key = a[0]
			}
			r, err := sendOrder(cmd.Context(), daemon, o)
			if err != nil {
				return err
			}
			return printReceipt(cmd.OutOrStdout(), &r)
		},
	}
	f := cmd.Flags()
	daemonFlag(cmd, &daemon)
	f.StringVar(&o.By, "by", "", "who gives this order (required)")
	_ = cmd.MarkFlagRequired("by")
	for _, name := range flags {
		switch name {
		case "note":
			f.StringVar(&o.Reason, "note", "", "a remark for the journal")
		case "reason":
			f.StringVar(&o.Reason, "reason", "", "why")
			if verb != wire.VerbCutClip {
				_ = cmd.MarkFlagRequired("reason")
			}
		case "for":
			f.DurationVar(&long1, "for", 0, "how long, e.g. 8h (required, 24h at most)")
			_ = cmd.MarkFlagRequired("for")
		case "last":
			f.DurationVar(&last, "last", 0, "how far back from now, e.g. 30s")
			f.StringVar(&from, "from", "", "or from when, e.g. 2030-05-01T06:00:00Z")
			f.StringVar(&to, "to", "", "and until when")
		}
	}
	return cmd
}

func daemonFlag(cmd *cobra.Command, daemon *string) {
	cmd.Flags().StringVar(daemon, "daemon", "http://127.0.0.1:8411", "address of the running daemon's page")
}

// clockFlag reads a time flag; empty gives none.
func clockFlag(name, s string) (time.Time, error) {
	if s == "" {
		return time.Time{}, nil
	}
	t, err := time.Parse(time.RFC3339, s)
	if err != nil {
		return t, fmt.Errorf("--%s %q: write 2030-05-01T06:00:00Z", name, s)
	}
	return t, nil
}

// sendOrder gives the daemon an order and waits for the answer; a refusal is no error here.
func sendOrder(ctx context.Context, daemon string, o wire.Order) (r wire.Receipt, err error) {
	if err := o.Check(); err != nil {
		return r, err
	}
	body, err := json.Marshal(o)
	if err != nil {
		return r, err
	}
	ctx, cancel := context.WithTimeout(ctx, 20*time.Second)
	defer cancel()
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, strings.TrimRight(daemon, "/")+"/api/v1/orders", bytes.NewReader(body))
	if err != nil {
		return r, err
	}
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set(panel.OrderHeader, "tool")
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return r, fmt.Errorf("the daemon does not answer: %w (an order needs it running)", err)
	}
	defer resp.Body.Close()
	raw, err := io.ReadAll(io.LimitReader(resp.Body, 1<<20))
	if err != nil {
		return r, fmt.Errorf("the daemon's answer did not arrive whole: %w (see lapwing journal for what was done)", err)
	}
	if resp.StatusCode != http.StatusOK && resp.StatusCode != http.StatusConflict {
		return r, fmt.Errorf("the daemon says: %s", strings.TrimSpace(string(raw)))
	}
	if err := json.Unmarshal(raw, &r); err != nil {
		return r, fmt.Errorf("the daemon's answer is not readable: %w (see lapwing journal for what was done)", err)
	}
	return r, nil
}

// printReceipt says what became of an order; one that was refused is an error.
func printReceipt(w io.Writer, r *wire.Receipt) error {
	if !r.Accepted {
		return errors.New("refused: " + r.Said)
	}
	fmt.Fprintln(w, r.Said)
	if !r.OnDisk {
		fmt.Fprintln(w, "The disk has not taken it yet: it is lost if the daemon stops before it does.")
	}
	return nil
}
