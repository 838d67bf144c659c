package tape

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"testing"

	"lapwing/internal/acq"
)

// A tape that its daemon has left is read, exported and left as it was.
func TestOpenRead(t *testing.T) {
	t.Parallel() // it waits two seconds for a lock
	dir := t.TempDir()
	path := filepath.Join(dir, "tape.db")
	info := acq.Info{Rate: 1000, Channels: 2, Bits: 24, Name: "bench"}
	w, err := Open(path, Options{Info: info})
	if err != nil {
		t.Fatal(err)
	}
	b := acq.Block{N: 500, Counts: [][]int32{make([]int32, 500), make([]int32, 500)}}
	for k := range 6 {
		for i := range b.Counts[0] {
			b.Counts[0][i], b.Counts[1][i] = int32(k*500+i), int32(-i)
		}
		b.Seq0 = int64(k * 500)
		w.Append(&b)
	}
	if err := w.Flush(context.Background()); err != nil {
		t.Fatal(err)
	}
	if _, err := w.Protect(Clip{ID: "one", Reason: "test", From: 200, To: 1700}); err != nil {
		t.Fatal(err)
	}
	if _, err := OpenRead(path); err == nil {
		t.Fatal("a tape in use was opened a second time")
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}

	r, err := OpenRead(path)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	if got := r.Info(); got.Rate != info.Rate || got.Channels != info.Channels || got.Bits != info.Bits || got.Name != info.Name {
		t.Errorf("info %+v, want %+v", got, info)
	}
	if c := r.Clips(); len(c) != 1 || c[0].ID != "one" || !c[0].Complete {
		t.Fatalf("clips %+v", c)
	}
	var n int
	if err := r.ReadClip("one", func(b *acq.Block) error {
		for i, x := range b.Counts[0] {
			if int64(x) != b.Seq0+int64(i) {
				t.Fatalf("sample %d reads %d", b.Seq0+int64(i), x)
			}
		}
		n += b.N
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	if n != 1500 {
		t.Errorf("%d samples, want 1500", n)
	}
	if err := r.Flush(context.Background()); !errors.Is(err, ErrClosed) {
		t.Errorf("flush of a tape that is only read: %v", err)
	}
	if _, err := OpenRead(filepath.Join(dir, "none.db")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a tape that is not there: %v", err)
	}
}
