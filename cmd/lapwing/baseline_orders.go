package main

import (
	"github.com/spf13/cobra"

	"lapwing/internal/wire"
)

// ordering adds the flags that every order has.
func (b *baselines) ordering(cmd *cobra.Command, o *wire.Order) *cobra.Command {
	cmd.Flags().StringVar(&o.By, "by", "", "who gives the order (required)")
	cmd.Flags().StringVar(&o.Reason, "reason", "", "why, for the journal")
	_ = cmd.MarkFlagRequired("by")
	return cmd
}

func (b *baselines) learnCommand() *cobra.Command {
	o := wire.Order{Verb: wire.VerbLearnStart}
	cmd := &cobra.Command{
		Use: "learn", Short: "Declare the machine healthy from now on and learn it", Args: cobra.NoArgs,
		Long: `learn starts a learning run over the next steady turns. Run the machine through the load steps,
ratios and speeds that it is used at: only duties that were seen are judged later. The run ends
by itself; what it gave then waits for accept or drop, with whatever is doubtful about it.
With --add the baseline in force stays, and load steps that it has not seen are added to it.`,
		Example: `  lapwing baseline learn --turns 3000 --by "R. Example" --reason "valves overhauled, leak test passed"`,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return b.give(cmd.Context(), cmd.OutOrStdout(), o)
		},
	}
	cmd.Flags().IntVar(&o.Turns, "turns", 600, "steady turns of every throw, 45 at least")
	cmd.Flags().BoolVar(&o.Auto, "accept", false, "put it in force at its end without another word")
	cmd.Flags().BoolVar(&o.Add, "add", false, "add load steps to the baseline in force")
	return b.ordering(cmd, &o)
}

func (b *baselines) acceptCommand() *cobra.Command {
	o := wire.Order{Verb: wire.VerbLearnAccept}
	return b.ordering(&cobra.Command{
		Use: "accept", Short: "Put in force what a learning run gave", Args: cobra.NoArgs,
		Long: `accept puts in force what a learning run gave. Given while the run is still on, it ends the run early;
what it gave then waits for a second accept, or for drop.`,
		RunE: func(cmd *cobra.Command, _ []string) error { return b.give(cmd.Context(), cmd.OutOrStdout(), o) },
	}, &o)
}

func (b *baselines) dropCommand() *cobra.Command {
	o := wire.Order{Verb: wire.VerbLearnDrop}
	return b.ordering(&cobra.Command{
		Use: "drop", Short: "Throw a learning run or its outcome away", Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error { return b.give(cmd.Context(), cmd.OutOrStdout(), o) },
	}, &o)
}

func (b *baselines) renewCommand() *cobra.Command {
	o := wire.Order{Verb: wire.VerbRenew}
	var more bool
	cmd := &cobra.Command{
		Use: "renew PART", Short: "Learn one part anew after work on it", Args: cobra.ExactArgs(1),
		Long: `renew starts a learning run for what work on one part has touched, and for nothing else; that is not
judged until the run is accepted. The part is a throw (t1), an end (t1.he), a valve group or valve
(t1.he.suction, t1.he.s1), the rings or packing (t1.rings, t1.packing), or a channel's name.

A new valve, for instance, touches its own group's impacts and covers, everything that stands on the
pressure of that end, and the leak areas of the cylinder, which are fitted together. Every load step
has to be run again before it is judged again; with --more a later run adds those that an earlier one
has not seen.`,
		Example: `  lapwing baseline renew t1.he.suction --by "R. Example" --reason "s1 replaced"`,
		RunE: func(cmd *cobra.Command, args []string) error {
			if o.Subject = args[0]; more {
				o.Verb, o.Add = wire.VerbLearnStart, true
			}
			return b.give(cmd.Context(), cmd.OutOrStdout(), o)
		},
	}
	cmd.Flags().IntVar(&o.Turns, "turns", 600, "steady turns of the throw, 45 at least")
	cmd.Flags().BoolVar(&more, "more", false, "go on with load steps that an earlier renewal of this part has not seen")
	return b.ordering(cmd, &o)
}
