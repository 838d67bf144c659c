// Command lapwing is the hand tool: check a skid file, play the demo, review a recording, pull a clip, listen.
package main

import (
	"context"
	"fmt"
	"os"
	"os/signal"
	"syscall"

	"github.com/spf13/cobra"

	"lapwing/internal/uplink"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	if err := root().ExecuteContext(ctx); err != nil {
		fmt.Fprintln(os.Stderr, "lapwing:", err)
		os.Exit(1)
	}
}

func root() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "lapwing",
		Short: "Hand tool of the Lapwing valve monitor",
		Long: `lapwing is the hand tool of the Lapwing valve monitor for reciprocating compressors.

  technician     lapwing check FILE       what the skid file says, and every doubt
                 lapwing datum REC.wav    dead centres, clearances, pressure zeros from a recording
                 lapwing ripple REC.wav   how unevenly the shaft turns, from a toothed wheel
                 lapwing baseline         learn, accept, renew, compare what the machine shows when healthy
  control room   lapwing listen           alarms as they arrive over MQTT
                 lapwing alarms           what stands, and the keys to name it by
                 lapwing ack KEY          acknowledge; also reset, shelve, unshelve, out, back
                 lapwing journal          who did what, when and why
                 lapwing why SUBJECT      why something was found, or why nothing was
                 lapwing registers FILE   the Modbus registers for the control system
  analyst        lapwing cut LABEL        protect the raw samples of the last seconds
                 lapwing pull CLIP        raw samples around an event, as WAV
                 lapwing review REC.wav   the same analysis again, offline
  new here?      lapwing demo             a modelled machine, from healthy to alarm

Monitoring only, never a protection system. Before touching a valve or transducer: isolate,
depressurise and lock out; follow site permits, local codes and licensed practice.`,
		SilenceUsage:  true,
		SilenceErrors: true,
	}
	cmd.AddCommand(checkCommand(), demoCommand(), reviewCommand(), rippleCommand(), datumCommand(), pullCommand(), chartCommand(), tablesCommand(), listenCommand(), alarmsCommand(), journalCommand(), whyCommand())
	cmd.AddCommand(orderCommands()...)
	cmd.AddCommand(baselineCommand(), registersCommand())
	return cmd
}

func listenCommand() *cobra.Command {
	var cfg uplink.Config
	r := uplink.Reader{W: os.Stdout}
	var rootTopic string
	cmd := &cobra.Command{
		Use:   "listen",
		Short: "Show alarms as a control room would read them",
		Long: `listen subscribes to a broker and prints every alarm transition with its evidence, the
alarms that stand when it joins, and each change of the monitors' health.
A transition that the broker delivers twice is shown once.

An alarm is advice, not a permit to work. Before anybody touches a valve or transducer because
of one: isolate, depressurise and lock out; follow site permits, local codes and licensed practice.`,
		Example: `  lapwing listen --broker tcp://broker.plant:1883`,
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			r.Root = rootTopic
			cfg.ClientID = fmt.Sprintf("lapwing-listen-%d", os.Getpid())
			return uplink.Listen(cmd.Context(), cfg, rootTopic, r.Show, func(s string) { fmt.Fprintln(os.Stderr, s) })
		},
	}
	f := cmd.Flags()
	f.StringVar(&cfg.Broker, "broker", "tcp://127.0.0.1:1883", "address of the MQTT broker")
	f.StringVar(&rootTopic, "root", "lapwing", "topic root")
	f.StringVar(&cfg.UserFile, "user-file", "", "file that holds the user name")
	f.StringVar(&cfg.PasswordFile, "password-file", "", "file that holds the password")
	f.StringVar(&cfg.CAFile, "ca", "", "CA certificate of the broker (PEM)")
	f.StringVar(&cfg.CertFile, "cert", "", "client certificate (PEM)")
	f.StringVar(&cfg.KeyFile, "key", "", "client key (PEM)")
	f.BoolVar(&r.Features, "features", false, "also show condensed features")
	f.IntVar(&r.Evidence, "evidence", 0, "lines of evidence under an alarm; 0 shows all")
	return cmd
}
