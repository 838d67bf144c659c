package tape

import (
	"bufio"
	"context"
	"flag"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"

	"lapwing/internal/acq"
)

var kills = flag.Int("kills", 5, "SIGKILLs at random moments")

// runChild is the child of the crash test: it appends segments, asks for a clip now and then, and says after each
// flush how far it is, until it is killed.
func runChild() bool {
	dir := os.Getenv("LAPWING_TAPE_CHILD")
	if dir == "" {
		return false
	}
	opt := small()
	opt.noSync = false
	tp, err := Open(filepath.Join(dir, "tape.db"), opt)
	if err != nil {
		fmt.Println("error", err)
		os.Exit(1)
	}
	for seq := tp.Stats().NewestSeq; ; seq += 300 {
		feed(tp, seq, seq+300)
		if seq%900 == 0 {
			if _, err := tp.Protect(Clip{ID: fmt.Sprint("at-", seq), From: max(0, seq-250), To: seq + 400}); err != nil {
				fmt.Println("error", err)
				os.Exit(1)
			}
		}
		if err := tp.Flush(context.Background()); err != nil {
			fmt.Println("error", err)
			os.Exit(1)
		}
		fmt.Println(seq + 300)
	}
}

func TestKilledAtAnyMoment(t *testing.T) {
	rounds := *kills
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	seed := uint64(os.Getpid())
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	var acked int64
	for round := range rounds {
		cmd := exec.Command(exe)
		cmd.Env = append(os.Environ(), "LAPWING_TAPE_CHILD="+dir)
		out, err := cmd.StdoutPipe()
		if err != nil {
			t.Fatal(err)
		}
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		lines := bufio.NewScanner(out)
		for range 1 + rnd.IntN(12) {
			if !lines.Scan() {
				t.Fatal("child ended by itself")
			}
			if acked, err = strconv.ParseInt(lines.Text(), 10, 64); err != nil {
				t.Fatalf("child says %q", lines.Text())
			}
		}
		if err := cmd.Process.Kill(); err != nil {
			t.Fatal(err)
		}
		for lines.Scan() { // what it said before it died counts too
			if seq, err := strconv.ParseInt(lines.Text(), 10, 64); err == nil && seq == acked+300 {
				acked = seq
			}
		}
		_ = cmd.Wait() // it was killed: that is its error

		tp, err := Open(filepath.Join(dir, "tape.db"), small())
		if err != nil {
			t.Fatal(err)
		}
		s := tp.Stats()
		if len(s.Damage) > 0 || s.NewestSeq < acked || s.NewestSeq > acked+300 {
			t.Fatalf("round %d: newest %d, flushed %d, damage %v", round, s.NewestSeq, acked, s.Damage)
		}
		wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(s.OldestSeq, s.NewestSeq, f) }, s.OldestSeq, s.NewestSeq) // it rolls after some 70 kills
		for _, c := range tp.Clips() {
			if c.Complete && c.Short == "" {
				wantSamples(t, clipReader(tp, c.ID), c.From, c.To)
			} else if c.Complete || c.To < s.NewestSeq-1000 {
				t.Errorf("round %d: clip %+v", round, c)
			}
		}
		if err := tp.Check(); err != nil {
			t.Fatal(err)
		}
		if err := tp.Close(); err != nil {
			t.Fatal(err)
		}
	}
	t.Logf("%d rounds, %d samples flushed, none lost, clips whole", rounds, acked)
}
