package tape

import (
	"bytes"
	"errors"
	"flag"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sync"
	"testing"

	"lapwing/internal/acq"
)

var (
	powerCuts = flag.Int("cuts", 20, "simulated power cuts")
	powerSeed = flag.Uint64("cut-seed", 11, "where they fall")
)

// sector is what a disk writes whole or not at all.
const sector = 512

// cutPower gives what a disk may hold when the power goes during the commit that leads from one state of a file to
// the next. bbolt writes its pages, waits for the disk, and then writes one of the two meta pages: before the wait any
// part of the pages may have arrived, in any order; after it all of them, and the meta page up to any byte.
func cutPower(rnd *rand.Rand, before, after []byte, inMeta bool) []byte {
	const metas = 2 * 4096
	out := bytes.Clone(before)
	if len(after) > len(before) && (inMeta || rnd.IntN(2) == 0) {
		out = append(out, make([]byte, len(after)-len(before))...) // grown, and zero where nothing has arrived
	}
	for at := metas; at < len(out) && at < len(after); at += sector {
		if inMeta || rnd.IntN(2) == 0 {
			copy(out[at:min(at+sector, len(out))], after[at:])
		}
	}
	if inMeta {
		n := rnd.IntN(4096)
		for at := 0; at < metas; at += 4096 {
			copy(out[at:at+n], after[at:at+n])
		}
	}
	return out
}

// Power cuts of either kind, in a ring that is rolling and in the clips: what was committed before is there,
// nothing is set aside, every page is in order, and the tape goes on.
func TestPowerGoesDuringACommit(t *testing.T) {
	opt := small()
	opt.MaxBytes, opt.ClipBytes = 1<<20+20<<10, 1<<20+20<<10
	dir := t.TempDir()
	type state struct {
		kind  string
		files map[string][]byte
		next  int64 // committed before
	}
	var mu sync.Mutex
	var states []state
	var tp *Tape
	recording := false
	snap := func(kind string) state {
		s := state{kind: kind, files: map[string][]byte{}, next: tp.next.Load()}
		for _, name := range []string{"tape.db", "clips.db"} {
			b, err := os.ReadFile(filepath.Join(dir, name))
			if err != nil {
				t.Error(err)
			}
			s.files[name] = b
		}
		return s
	}
	opt.disk = func(kind string) error {
		mu.Lock()
		defer mu.Unlock()
		if recording {
			states = append(states, snap(kind))
		}
		return nil
	}
	var err error
	if tp, err = Open(filepath.Join(dir, "tape.db"), opt); err != nil {
		t.Fatal(err)
	}
	const rolled, watched = 40_000, 48_000
	feed(tp, 0, rolled)
	flush(t, tp)
	mu.Lock()
	recording = true
	mu.Unlock()
	for seq := int64(rolled); seq < watched; seq += 2000 {
		if _, err := tp.Protect(Clip{ID: "c" + string(rune('a'+seq/2000%26)), From: seq - 500, To: seq + 700}); err != nil {
			t.Fatal(err)
		}
		feed(tp, seq, seq+2000)
		flush(t, tp)
	}
	mu.Lock()
	recording = false
	states = append(states, snap("end"))
	mu.Unlock()
	if s := tp.Stats(); s.OldestSeq == 0 {
		t.Fatalf("the ring did not roll: %+v", s)
	}
	if err := tp.Close(); err != nil {
		t.Fatal(err)
	}

	opt.disk = nil
	seed, rounds := *powerSeed, *powerCuts
	rnd := rand.New(rand.NewPCG(seed, 2))
	cuts := map[string]int{}
	for round := range rounds {
		i := rnd.IntN(len(states) - 1)
		name := map[string]string{"tape": "tape.db", "clips": "clips.db"}[states[i].kind]
		other := map[string]string{"tape.db": "clips.db", "clips.db": "tape.db"}[name]
		dir := t.TempDir()
		torn := cutPower(rnd, states[i].files[name], states[i+1].files[name], round%2 == 1)
		if err := errors.Join(os.WriteFile(filepath.Join(dir, name), torn, 0o600), os.WriteFile(filepath.Join(dir, other), states[i].files[other], 0o600)); err != nil {
			t.Fatal(err)
		}
		tp, err := Open(filepath.Join(dir, "tape.db"), opt)
		if err != nil {
			t.Fatalf("round %d: %v", round, err)
		}
		s := tp.Stats()
		if len(s.Damage) > 0 || s.NewestSeq < states[i].next {
			t.Fatalf("round %d, %s: newest %d, committed %d, damage %v", round, name, s.NewestSeq, states[i].next, s.Damage)
		}
		wantSamples(t, func(f func(*acq.Block) error) error { return tp.Read(s.OldestSeq, s.NewestSeq, f) }, s.OldestSeq, s.NewestSeq)
		for _, c := range tp.Clips() {
			if c.Complete && c.Short == "" {
				wantSamples(t, clipReader(tp, c.ID), c.From, c.To)
			}
		}
		feed(tp, s.NewestSeq, s.NewestSeq+400)
		flush(t, tp)
		if err := errors.Join(tp.Check(), tp.Close()); err != nil {
			t.Fatalf("round %d: %v", round, err)
		}
		cuts[name]++
	}
	if cuts["tape.db"] < rounds/4 || cuts["clips.db"] < rounds/12 {
		t.Errorf("cuts %v: too few of one kind", cuts)
	}
	t.Logf("seed %d: %v cuts over %d commits, half before the meta page and half within it: nothing committed was lost", seed, cuts, len(states)-1)
}
