package ledger

import (
	"bufio"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"
)

// commitForEver is the child of the crash test: it commits a transition, a message and a document at a time, and says
// so after each, until it is killed.
func commitForEver(path string) {
	l, err := Open(path, Options{})
	if err != nil {
		fmt.Println("error", err)
		os.Exit(1)
	}
	for id := l.Stats().LastJournal + 1; ; id++ {
		err := l.Commit(func(tx *Tx) error {
			if err := tx.Journal(transition(id)); err != nil {
				return err
			}
			if _, err := tx.Enqueue(Alarm, "t", []byte(strconv.FormatUint(id, 10)), false); err != nil {
				return err
			}
			return tx.AlarmSnapshot(id)
		})
		if err != nil {
			fmt.Println("error", err)
			os.Exit(1)
		}
		fmt.Println(id)
	}
}

func TestKilledAtAnyMoment(t *testing.T) {
	const rounds = 12
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "state.db")
	seed := uint64(os.Getpid())
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	var acked uint64
	for round := range rounds {
		cmd := exec.Command(exe)
		cmd.Env = append(os.Environ(), "LAPWING_LEDGER_CHILD="+path)
		out, err := cmd.StdoutPipe()
		must(t, err)
		must(t, cmd.Start())
		lines := bufio.NewScanner(out)
		for range 1 + rnd.IntN(60) {
			if !lines.Scan() {
				t.Fatal("child ended by itself")
			}
			id, err := strconv.ParseUint(lines.Text(), 10, 64)
			if err != nil {
				t.Fatalf("child says %q", lines.Text())
			}
			acked = id
		}
		must(t, cmd.Process.Kill())
		for lines.Scan() { // what it said before it died counts too
			if id, err := strconv.ParseUint(lines.Text(), 10, 64); err == nil && id == acked+1 {
				acked = id
			}
		}
		_ = cmd.Wait() // it was killed: that is its error

		l := open(t, path, Options{})
		s := l.Stats()
		if s.Damage != nil || len(s.BadRecords) > 0 {
			t.Fatalf("round %d: %v %q", round, s.Damage, s.BadRecords)
		}
		js, err := l.Journal(0, 1<<20)
		must(t, err)
		ms, err := l.Next(0, 1<<20)
		must(t, err)
		var snap uint64
		if ok, err := l.AlarmSnapshot(&snap); !ok || err != nil {
			t.Fatalf("round %d: snapshot %v %v", round, ok, err)
		}
		n := uint64(len(js))
		if n < acked || n > acked+1 { // at most the one commit that was under way
			t.Fatalf("round %d: %d transitions, %d acknowledged", round, n, acked)
		}
		if uint64(len(ms)) != n || snap != n || s.LastMessage != n {
			t.Fatalf("round %d: %d transitions, %d messages, snapshot %d: a commit in part", round, n, len(ms), snap)
		}
		for i := range js {
			if js[i].ID != uint64(i+1) || ms[i].ID != uint64(i+1) || string(ms[i].Payload) != strconv.Itoa(i+1) {
				t.Fatalf("round %d: place %d holds transition %d, message %d %q", round, i, js[i].ID, ms[i].ID, ms[i].Payload)
			}
		}
		must(t, l.Close())
	}
	t.Logf("%d rounds, %d commits acknowledged, none lost, none twice", rounds, acked)
}
