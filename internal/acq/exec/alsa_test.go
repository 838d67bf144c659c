package exec

import (
	"encoding/binary"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"lapwing/internal/acq/acqtest"
)

// The recorder of Linux's own sound system, with no sound hardware: ALSA's file plug-in plays a file into what is recorded,
// over its null device. Debian: alsa-utils.
func TestALSARecorder(t *testing.T) {
	if _, err := exec.LookPath("arecord"); err != nil {
		t.Skip("arecord is not here: install alsa-utils")
	}
	const frames, channels = 30000, 6
	for _, name := range []string{"s16_le", "s24_3le", "s32_le"} {
		t.Run(name, func(t *testing.T) {
			dir := t.TempDir()
			f := formats[name]
			code := func(i, c int) int32 { return int32((i*7919+c*104729)%(1<<f.bits) - 1<<(f.bits-1)) }
			var raw []byte
			for i := range frames {
				for c := range channels {
					var four [4]byte
					binary.LittleEndian.PutUint32(four[:], uint32(code(i, c)))
					raw = append(raw, four[:f.size]...)
				}
			}
			conf := fmt.Sprintf("pcm.bench { type file; slave.pcm { type null }; file \"/dev/null\"; infile %q; format raw }\n", filepath.Join(dir, "in.raw"))
			for file, b := range map[string][]byte{"in.raw": raw, "asound.conf": []byte(conf)} {
				if err := os.WriteFile(filepath.Join(dir, file), b, 0o600); err != nil {
					t.Fatal(err)
				}
			}
			t.Setenv("ALSA_CONFIG_PATH", filepath.Join(dir, "asound.conf"))
			said := map[string]string{"s16_le": "S16_LE", "s24_3le": "S24_3LE", "s32_le": "S32_LE"}[name]
			c, err := Parse(fmt.Sprintf("format=%s,channels=%d,once:arecord -q -D bench -t raw -f %s -c %d -r 51200 -s %d", name, channels, said, channels, frames), 51200)
			if err != nil {
				t.Fatal(err)
			}
			s := opened(t, c)
			blocks, err := acqtest.Drain(s)
			if err != nil {
				t.Fatal(err)
			}
			x := acqtest.Join(blocks)
			if len(x.Seq) != frames || s.Stats().Lost != 0 {
				t.Fatalf("%d frames of %d, %+v", len(x.Seq), frames, s.Stats())
			}
			for i := range frames {
				for k := range channels {
					if x.Counts[k][i] != code(i, k) {
						t.Fatalf("frame %d, channel %d: %d, want %d", i, k, x.Counts[k][i], code(i, k))
					}
				}
			}
		})
	}
}
