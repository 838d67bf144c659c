package exec

import (
	"encoding/binary"
	"fmt"
	"os"
	"os/signal"
	"strconv"
	"strings"
	"syscall"
	"testing"

	"go.uber.org/goleak"
)

// The test binary is its own capture program: LAPWING_CAPTURE lists what to do, word by word.
//
//	frames:N   write N frames of two channels, s16_le: the frame's number, and its negative
//	bytes:N    write N zero bytes
//	say:TEXT   a line on standard error
//	exit:CODE  end
//	hang       do nothing until it is ended; deaf: not even on SIGTERM
//	only:FILE  what follows is for the first start only: FILE is made then
func TestMain(m *testing.M) {
	if plan := os.Getenv("LAPWING_CAPTURE"); plan != "" {
		capture(strings.Split(plan, " "))
	}
	goleak.VerifyTestMain(m)
}

func capture(plan []string) {
	n := 0
	for _, step := range plan {
		what, arg, _ := strings.Cut(step, ":")
		k, _ := strconv.Atoi(arg)
		switch what {
		case "frames":
			var raw []byte
			for range k {
				raw = binary.LittleEndian.AppendUint16(raw, uint16(int16(n)))
				raw = binary.LittleEndian.AppendUint16(raw, uint16(int16(-n)))
				n++
			}
			if _, err := os.Stdout.Write(raw); err != nil {
				os.Exit(9)
			}
		case "bytes":
			os.Stdout.Write(make([]byte, k))
		case "say":
			fmt.Fprintln(os.Stderr, strings.ReplaceAll(arg, "_", " "))
		case "exit":
			os.Exit(k)
		case "only":
			if _, err := os.Stat(arg); err == nil {
				os.Exit(0)
			}
			_ = os.WriteFile(arg, nil, 0o600)
		case "deaf":
			signal.Ignore(syscall.SIGTERM)
		case "hang":
			wait := make(chan os.Signal, 1)
			signal.Notify(wait, syscall.SIGUSR1) // which nobody sends
			<-wait
		}
	}
	os.Exit(0)
}

// program is a configuration that runs the plan.
func program(t *testing.T, plan string) Config {
	t.Helper()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	t.Setenv("LAPWING_CAPTURE", plan)
	return Config{Command: []string{self}, Format: "s16_le", Channels: 2, Rate: 10000}
}
