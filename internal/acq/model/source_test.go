package model

import (
	"context"
	"errors"
	"io"
	"math"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

func load(t *testing.T, name string) *skid.Skid {
	t.Helper()
	raw, err := configs.Files.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse(name, raw)
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

const demoFile = "biomethane-two-throw.yaml"

func TestSourceContract(t *testing.T) {
	sk := load(t, demoFile)
	acqtest.Run(t, func(t *testing.T) acq.Source {
		s, err := Open(sk, model.Script{}, Options{Seed: 1, Duration: 110 * time.Millisecond})
		if err != nil {
			t.Fatal(err)
		}
		return s
	})
}

// TestEnd: the run ends after its duration, to the sample, and a closed source says so.
func TestEnd(t *testing.T) {
	s, err := Open(load(t, demoFile), model.Script{}, Options{Seed: 1, Rate: 20000, BlockLen: 999, Duration: 250 * time.Millisecond})
	if err != nil {
		t.Fatal(err)
	}
	var b acq.Block
	total := int64(0)
	for {
		err := s.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if b.Seq0 != total {
			t.Fatalf("block starts at %d, want %d", b.Seq0, total)
		}
		total += int64(b.N)
	}
	if total != 5000 {
		t.Errorf("%d samples in 0.25 s at 20 kHz", total)
	}
	if p := s.Process(0.1); !p.Known || len(p.Stages) != 1 {
		t.Errorf("process values %+v", p)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if err := s.Read(context.Background(), &b); !errors.Is(err, ErrClosed) {
		t.Errorf("after Close Read gives %v", err)
	}
}

// TestExampleSkids: every example machine runs: its loaded ends open and close their valves, at its own duty and every load step.
func TestExampleSkids(t *testing.T) {
	files, err := configs.Files.ReadDir(".")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		t.Run(f.Name(), func(t *testing.T) {
			t.Parallel()
			sk := load(t, f.Name())
			for _, step := range sk.Steps {
				turns := 3.8
				s, err := Open(sk, model.Script{Step: step.Code}, Options{Seed: 1, Rate: 25600})
				if err != nil {
					t.Fatal(err)
				}
				samples := turns * 60 / sk.Machine.RatedRPM * s.Info().Rate
				var b acq.Block
				for n := 0.0; n < samples; n += float64(b.N) {
					if err := s.Read(context.Background(), &b); err != nil {
						t.Fatal(err)
					}
					if b.Clip {
						t.Fatalf("step %d: %s", step.Code, b.Note)
					}
				}
				seen, loaded := 0, false
				for _, th := range sk.Throws {
					loaded = loaded || th.Ends[0].Works && !step.Idle[th.ID+".he"] || th.Ends[1].Works && !step.Idle[th.ID+".ce"]
				}
				for _, tr := range s.Truths() {
					end := sk.Throws[tr.Throw].ID + [2]string{".he", ".ce"}[tr.End]
					if tr.Rev < 1 || step.Idle[end] {
						continue
					}
					seen++
					for name, e := range map[string]model.Event{"suction opening": tr.Suction.Open, "suction closing": tr.Suction.Close,
						"discharge opening": tr.Discharge.Open, "discharge closing": tr.Discharge.Close} {
						if math.IsNaN(e.Lift) || math.IsNaN(e.Impact) {
							t.Errorf("step %d: %s turn %d: no %s: %+v", step.Code, end, tr.Rev, name, e)
						}
					}
				}
				if loaded && seen == 0 {
					t.Errorf("step %d: no loaded turn seen", step.Code)
				}
			}
		})
	}
}

func TestOpenRefuses(t *testing.T) {
	sk := load(t, demoFile)
	if _, err := Open(sk, model.Script{}, Options{Duration: -1}); err == nil {
		t.Error("negative duration: no error")
	}
	if _, err := Open(sk, model.Script{}.Add(0, 0, model.ValveLeak, "t7.he.s1", 1e-6), Options{}); err == nil {
		t.Error("unknown valve: no error")
	}
}
