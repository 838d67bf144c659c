package wav

import (
	"bytes"
	"encoding/binary"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

func tool(t *testing.T, name string) string {
	t.Helper()
	p, err := exec.LookPath(name)
	if err != nil {
		t.Skipf("%s absent: the check against another program was not made", name)
	}
	return p
}

func run(t *testing.T, name string, args ...string) string {
	t.Helper()
	var stderr bytes.Buffer
	cmd := exec.CommandContext(t.Context(), name, args...)
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%s %v: %v: %s", name, args, err, stderr.Bytes())
	}
	return strings.TrimSpace(string(out))
}

func TestStrangerReadsOurs(t *testing.T) {
	sox, soxi := tool(t, "sox"), tool(t, "soxi")
	for _, bits := range []int{16, 24, 32} {
		path := filepath.Join(t.TempDir(), "ours.wav")
		w, err := Create(path, WriterOptions{Rate: 25600, Channels: 5, Bits: bits, Label: "clip"})
		if err != nil {
			t.Fatal(err)
		}
		b := acq.Block{Seq0: 1000, N: 777, Lost: 3, Note: "overrun", Counts: make([][]int32, 5)}
		var want []byte // what sox must see: interleaved, widened to 32 bit
		for c := range b.Counts {
			b.Counts[c] = make([]int32, b.N)
		}
		for i := range b.N {
			for c := range b.Counts {
				v := int32(uint32(i*2654435761+c*40503)) >> (32 - bits)
				b.Counts[c][i] = v
				want = binary.LittleEndian.AppendUint32(want, uint32(v)<<(32-bits))
			}
		}
		if err := w.Write(&b); err != nil {
			t.Fatal(err)
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		for flag, v := range map[string]string{"-r": "25600", "-c": "5", "-s": "777"} {
			if got := run(t, soxi, flag, path); got != v {
				t.Errorf("%d bit: soxi %s says %q, want %s", bits, flag, got, v)
			}
		}
		raw := filepath.Join(t.TempDir(), "out.s32")
		run(t, sox, "-D", path, "-t", "s32", raw)
		got, err := os.ReadFile(raw)
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got, want) {
			t.Errorf("%d bit: sox reads other codes than were written", bits)
		}
	}
}

func TestWeReadStrangers(t *testing.T) {
	sox := tool(t, "sox")
	dir := t.TempDir()
	var in []byte // 3 channels, 24 bit codes in 32, so that every width above 16 bit keeps them
	for i := range 3 * 500 {
		in = binary.LittleEndian.AppendUint32(in, uint32(i*2654435761)&0xFFFFFF00)
	}
	raw := filepath.Join(dir, "in.s32")
	if err := os.WriteFile(raw, in, 0o600); err != nil {
		t.Fatal(err)
	}
	src := []string{"-D", "-t", "s32", "-r", "8000", "-c", "3", raw}
	for name, c := range map[string]struct {
		out   []string
		shift int
	}{
		"16": {[]string{"-b", "16"}, 16}, "24": {[]string{"-b", "24"}, 8}, "32": {[]string{"-b", "32"}, 0},
		"float": {[]string{"-e", "floating-point", "-b", "32"}, 0},
	} {
		path := filepath.Join(dir, name+".wav")
		run(t, sox, append(append(append([]string{}, src...), c.out...), path)...)
		s, err := Open(path, Options{})
		if err != nil {
			t.Error(err)
			continue
		}
		blocks, err := acqtest.Drain(s)
		got := acqtest.Join(blocks)
		if err != nil || len(got.Seq) != 500 || len(got.Counts) != 3 {
			t.Fatalf("%s: %d samples, %v", name, len(got.Seq), err)
		}
		for i := range 3 * 500 {
			v := int64(int32(binary.LittleEndian.Uint32(in[4*i:])))
			// sox rounds to the narrower width, half up, and saturates at the top.
			want := min((v+(1<<c.shift)>>1)>>c.shift, 1<<(31-c.shift)-1)
			if g := int64(got.Counts[i%3][i/3]); g != want {
				t.Fatalf("%s: sample %d of input %d is %d, want %d", name, i/3, i%3, g, want)
			}
		}
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	}
	// A stream: sox cannot seek back in a pipe and leaves its own idea of an unknown length.
	cmd := exec.CommandContext(t.Context(), sox, append(src, "-b", "24", "-t", "wav", "-")...)
	piped, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	s := open(t, piped, Options{})
	if blocks, err := acqtest.Drain(s); err != nil || len(acqtest.Join(blocks).Seq) != 500 {
		t.Errorf("piped: %v, %d samples, remarks %q", err, len(acqtest.Join(blocks).Seq), s.Remarks())
	}
}
