package turn

import (
	"context"
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"os"
	"os/exec"
	"runtime"
	"strings"
	"testing"
	"time"
)

// Whole turns have the same bits on a processor without vectors: this test runs itself again with them turned off.
func TestTurnsWithoutVectors(t *testing.T) {
	const again = "LAPWING_TURN_AGAIN"
	cfg, frames := machine(t, 12)
	cfg.Throws[0].Pressure[1].Passage = Passage{900, 8}
	sum, valid := fnv.New128a(), 0
	for _, turn := range run(converter(t, cfg), frames) {
		if turn.Valid() {
			valid++
		}
		for _, th := range turn.Throws {
			for _, x := range [][]float64{th.Pos, th.Omega, th.P[0], th.P[1]} {
				_ = binary.Write(sum, binary.LittleEndian, x) // a hash takes everything
			}
			for _, v := range th.Vib {
				for _, x := range [][]float64{v.X, v.Peak, v.RMS, v.Leak} {
					_ = binary.Write(sum, binary.LittleEndian, x)
				}
			}
		}
	}
	if valid < 8 {
		t.Fatalf("%d valid turns", valid)
	}
	digest := fmt.Sprintf("digest %x", sum.Sum(nil))
	if os.Getenv(again) != "" {
		fmt.Println(digest)
		return
	}
	if runtime.GOARCH != "amd64" {
		t.Skip("only amd64 has two forms")
	}
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	cmd := exec.CommandContext(ctx, os.Args[0], "-test.run=^TestTurnsWithoutVectors$", "-test.v")
	cmd.Env = append(os.Environ(), again+"=1", "GODEBUG=cpu.avx2=off")
	out, err := cmd.CombinedOutput()
	if err != nil || !strings.Contains(string(out), digest) {
		t.Fatalf("%v; want %s, without vectors:\n%s", err, digest, out)
	}
}
